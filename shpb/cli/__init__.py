"""The command line: parses, calls, prints. Holds no physics."""
