"""Where an arm can strike, and how fast: every strike of a grid, from both sides."""
