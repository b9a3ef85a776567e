"""Beam directions: over the sphere, and as the patient sees them."""
