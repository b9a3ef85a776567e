"""What Wideberth reads, writes and shows. Imports `geometry`, never the reverse."""

__version__ = "0.1.0"
