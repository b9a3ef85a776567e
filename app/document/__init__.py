"""A document at work: what it holds, its edits, and undo. No Qt."""
