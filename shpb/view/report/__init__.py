"""Reports as single HTML files: of a shot, of a campaign. Made from stored results alone, the same bytes each time."""
