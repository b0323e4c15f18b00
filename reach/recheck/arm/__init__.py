"""The arm in forms of its own: kinematics, dynamics, stated limits, and what a motion makes of them."""
