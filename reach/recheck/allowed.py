"""What rounding may leave between the two programs: every tolerance, with its unit and its reason.

Both compute in double precision (2.2e-16 of a value) along ways of ten or so multiplications, and the evidence is
stored in full. So what should be equal is so to about 1e-14 of its size; each tolerance stands a factor of 1000 or more
above that, and far below anything that a wrong sign, axis, mass or sample would leave.
"""

from __future__ import annotations

PLACE_M = 1e-8  # of a point an arm's length away; a posture off by 1e-8 rad moves it by that much
TURN_RAD = 1e-8  # of an axis' direction
SPEED_M_S = 1e-8  # of a point
RATE_RAD_S = 1e-8  # of a turning body
JOINT = 1e-9  # rad or m: of a joint's position that is stored and must be the one stated
STATE_SHARE = 1e-9  # of the largest position or velocity of a motion, between rows that belong together

# The engine turns every inertia to principal axes, which costs a few digits of an eigenvalue decomposition. Measured on
# 47 published robots with 1 to 15 joints: 5e-12 of the largest torque.
TORQUE_SHARE = 1e-6  # of a joint's largest torque in the motion

LIMIT_SHARE = 1e-6  # of a stated limit: a claim "at most" whose motion stands at the limit itself
LIMIT_LEAST = 1e-9  # rad or m, per s …, N·m or N: of a limit that is zero

# verdict.json rounds to nine significant digits: half of the last one is 5e-9 of a number that begins with 1.
PEAK_SHARE = 1e-6  # of a limit or a peak, whichever is larger: a peak in verdict.json, torque among them
NUMBER = 1e-12  # of a number that is read from the same text by two readers

# A strike's joint velocities are solved for with a ridge of 1e-9 of the rows' squares, so that singular postures have
# an answer. Where joints are fast enough for the strike, rows are no weaker than 1/100 of the strongest: that leaves
# 1e-5 of the speed. On the examples it is 5e-9 m/s, on random arms 1.3e-6 m/s at the most.
STRIKE_M_S = 1e-5
STRIKE_RAD_S = 1e-4

TIME_S = 1e-9  # of an instant; a ball at 10 m/s passes 1e-8 m in it
DIGITS = 1e-8  # of a number in verdict.json, which rounds to nine digits
