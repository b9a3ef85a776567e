"""What stands in the way of a pose, and what would help."""
