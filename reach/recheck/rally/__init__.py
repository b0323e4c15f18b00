"""The second opinion on an envelope."""
