"""The tests, and the one check command: `python -m tests.check`."""
