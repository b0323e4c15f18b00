"""Trials: a law of control keeps a ball up with the arm, in simulation."""
