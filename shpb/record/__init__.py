"""Raw records in: one small reader per format, chosen by content, not by name alone."""
