"""Paddle strikes and juggling on jointed arms: what an arm can deliver, and what keeps it from more."""
