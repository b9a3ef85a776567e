"""The set-up as a form."""
