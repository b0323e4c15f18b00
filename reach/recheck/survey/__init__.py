"""The second opinion on a survey."""
