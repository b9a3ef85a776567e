"""A plan against a set-up: the check, the dry run, measured gaps, and how long it takes. No Qt."""
