"""Files that are read and written, one module a format."""
