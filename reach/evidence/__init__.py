"""What a finished motion shows: measured limits, strikes and tracking. Knows no solver."""
