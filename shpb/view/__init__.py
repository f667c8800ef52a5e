"""Results as people read them: terminal text, a summary for machines, the one-page figure."""
