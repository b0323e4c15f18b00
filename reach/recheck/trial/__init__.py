"""The second opinion on trials of a law."""
