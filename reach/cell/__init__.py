"""The frozen description of a cell: arm, paddle, limits, margins, acceptance, what is asked. Data only.

Everything is in SI units and in radians. Arrays are read-only.
"""

from reach.cell.arm import ArmSpec as ArmSpec
from reach.cell.arm import HeldJoint as HeldJoint
from reach.cell.arm import Joint as Joint
from reach.cell.arm import JointLimits as JointLimits
from reach.cell.asked import QUARTERS_RAD as QUARTERS_RAD
from reach.cell.asked import CommandLog as CommandLog
from reach.cell.asked import Follow as Follow
from reach.cell.asked import LawName as LawName
from reach.cell.asked import Rally as Rally
from reach.cell.asked import Recovered as Recovered
from reach.cell.asked import Sensor as Sensor
from reach.cell.asked import Starts as Starts
from reach.cell.asked import Survey as Survey
from reach.cell.asked import Trial as Trial
from reach.cell.basics import STANDARD_GRAVITY_M_S2 as STANDARD_GRAVITY_M_S2
from reach.cell.basics import Array as Array
from reach.cell.basics import Bound as Bound
from reach.cell.basics import Input as Input
from reach.cell.basics import LimitName as LimitName
from reach.cell.basics import Pose as Pose
from reach.cell.basics import Vec3 as Vec3
from reach.cell.control import Accept as Accept
from reach.cell.control import Drive as Drive
from reach.cell.control import Margins as Margins
from reach.cell.control import SolverSpec as SolverSpec
from reach.cell.paddle import Ball as Ball
from reach.cell.paddle import Contact as Contact
from reach.cell.paddle import Paddle as Paddle
from reach.cell.paddle import Part as Part
from reach.cell.paddle import Tool as Tool
from reach.cell.whole import Cell as Cell
