"""Slow, plain and independent ways to the same answers: what the fast ones are held against."""
