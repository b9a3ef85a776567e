"""The window. Only here, and in `app.jobs`, is Qt known."""
