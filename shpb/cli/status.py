"""Exit statuses."""

DONE = 0
FAILED = 1
BAD_INPUT = 2
REJECTED = 3
