"""The direction discs."""
