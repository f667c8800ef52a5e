"""Whether the numbers can be trusted: checks, findings and the verdict."""
