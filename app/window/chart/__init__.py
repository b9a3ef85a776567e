"""The angle chart."""
