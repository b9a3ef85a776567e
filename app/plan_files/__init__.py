"""Files about a plan: what is read of one, and what is written of its check."""
