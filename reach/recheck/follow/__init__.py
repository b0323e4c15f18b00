"""The second opinion on a followed log."""
