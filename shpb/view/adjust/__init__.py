"""The window in which windows and feet of a shot are moved, for any interactive back end of matplotlib."""
