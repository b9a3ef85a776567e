"""The room in 3D."""
