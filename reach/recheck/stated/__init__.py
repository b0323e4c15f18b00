"""What the inputs state, read again."""
