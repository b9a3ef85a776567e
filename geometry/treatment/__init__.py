"""A plan's fields and the moves between them, checked."""
