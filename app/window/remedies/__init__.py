"""What stands in the way, and what would help."""
