"""What is written of a document: the set-up itself, side files, the list of recent files."""
