"""A plan's fields."""
