"""The version of the program, in one place that loads nothing."""

VERSION = "0.1.0"
