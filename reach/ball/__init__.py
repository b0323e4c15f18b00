"""The ball: its flight, when it meets the face, and what the impact makes of it."""

from __future__ import annotations

from reach.ball.contact import Face as Face
from reach.ball.contact import Struck as Struck
from reach.ball.contact import first_contact as first_contact
from reach.ball.contact import struck as struck
from reach.ball.flight import Air as Air
from reach.ball.flight import Flight as Flight
from reach.ball.flight import Launch as Launch
from reach.ball.flight import fall as fall
from reach.ball.flight import launch as launch
from reach.ball.impact import HOLLOW as HOLLOW
from reach.ball.impact import NoContact as NoContact
from reach.ball.impact import friction_impulse as friction_impulse
from reach.ball.impact import grip_share as grip_share
from reach.ball.impact import impact as impact
from reach.ball.impact import restitution as restitution
from reach.ball.impact import strike_for as strike_for
from reach.ball.path import LONGEST_S as LONGEST_S
from reach.ball.path import NoFlight as NoFlight
