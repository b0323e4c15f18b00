"""How fast an arm can strike at one place: upper bounds, whole motions, and what a hit does to the arm."""
