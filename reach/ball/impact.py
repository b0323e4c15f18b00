"""Impact of a hollow ball on the paddle's face: ball in to ball out, and the strike that a wanted ball out asks for.

All vectors stand along world axes. The face normal n points at the ball. A ball's spin is told as its radius times its
angular velocity, in m/s. The paddle gives along its normal by the ratio of the ball's mass to its own effective mass
there; 0 is a paddle that does not give. Across the normal it never gives.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from reach.cell import Array, Contact
from reach.errors import ReachError

HOLLOW = 2 / 3
"""Moment of inertia of a thin shell over mass times radius squared, alpha."""

LEAST_CHANGE_M_S = 1e-9  # a smaller change of the ball's velocity is rounding
ROUNDING = 1e-12  # of the ball's speed: a smaller part across the change is none


class NoContact(ReachError):
    """Ball and face do not meet, or no strike makes this ball of that."""


def restitution(contact: Contact, approach_m_s: float) -> float:
    """Normal restitution at a speed of approach along the normal, in m/s.

    By the contact's table where it has one, straight between its rows and held beyond its ends.
    """
    if not contact.restitution_at:
        return contact.restitution
    speeds, values = zip(*contact.restitution_at, strict=True)
    return float(np.interp(approach_m_s, speeds, values))


def impact(
    ball_in: ArrayLike,
    normal: ArrayLike,
    paddle_velocity: ArrayLike,
    contact: Contact,
    spin_m_s: ArrayLike = (0.0, 0.0, 0.0),
    mass_ratio: float = 0.0,
    inertia_share: float = HOLLOW,
) -> tuple[Array, Array]:
    """The ball right after contact with a moving face.

    Along the normal v' = v + (1 + e)(u - v)/(1 + mass_ratio), Newton's law of restitution for two bodies; for a
    paddle that does not give, -e v + (1 + e) u. Across it the face grips the ball, whose slip then turns by the
    tangential restitution, unless that takes more impulse than Coulomb friction gives; then the ball slips
    under all the friction there is.

    Parameters
    ----------
    ball_in : (3,) m/s, velocity of the ball's centre
    normal : (3,) unit face normal
    paddle_velocity : (3,) m/s, of the face at the contact, right before
    contact : Contact
    spin_m_s : (3,) m/s, radius times angular velocity
    mass_ratio : ball's mass over the paddle's effective mass along the normal
    inertia_share : ball's moment of inertia over mass times radius squared

    Returns
    -------
    ball_out, spin_out_m_s : (3,), (3,) m/s

    Raises
    ------
    NoContact
        The ball does not come nearer to the face.

    References
    ----------
    R. L. Garwin, "Kinematics of an ultraelastic rough ball", Am. J. Phys. 37 (1969) 88.
    R. Cross, "Grip-slip behavior of a bouncing ball", Am. J. Phys. 70 (2002) 1093.
    I. D. Walker, "Impact configurations and measures for kinematically redundant and multiple armed robot systems",
    IEEE Trans. Robotics and Automation 10 (1994) 670 (title and page from memory): effective mass of an arm
    that is struck.
    """
    velocity, n, face, spin = (
        np.asarray(v, dtype=float) for v in (ball_in, normal, paddle_velocity, spin_m_s)
    )
    relative = velocity - face
    approach = -float(relative @ n)
    if not approach > 0:
        raise NoContact(f"the ball does not approach the face: {-approach:g} m/s along its normal")
    push = (1 + restitution(contact, approach)) * approach / (1 + mass_ratio)
    slip = relative + approach * n - np.cross(spin, n)
    across = friction_impulse(slip, push, contact, inertia_share)
    return velocity + push * n + across, spin - np.cross(n, across) / inertia_share


def friction_impulse(slip: Array, push_m_s: float, contact: Contact, inertia_share: float = HOLLOW) -> Array:
    """Impulse per ball mass across the normal, (3,) m/s.

    Parameters
    ----------
    slip : (3,) m/s, of the ball's surface over the face at the contact
    push_m_s : impulse per ball mass along the normal
    """
    share = grip_share(contact, inertia_share)
    grip = share * float(np.linalg.norm(slip))
    most = contact.friction * push_m_s
    held = 1.0 if grip <= most else most / grip
    return -held * share * slip


def grip_share(contact: Contact, inertia_share: float = HOLLOW) -> float:
    """Impulse per ball mass, as a share of the slip, that a face which grips gives across its normal.

    An impulse j across the normal changes the slip by (1 + 1/alpha) j; gripping leaves -e_t times it.
    """
    return inertia_share * (1 + contact.tangential_restitution) / (1 + inertia_share)


def strike_for(
    ball_in: ArrayLike, ball_out: ArrayLike, contact: Contact, mass_ratio: float = 0.0
) -> tuple[Array, float]:
    """Face normal and paddle speed along it that make one velocity of the ball into another.

    The ball has no spin, and the paddle right before contact moves along its normal. Always inverts `impact`; the
    speed is negative where the paddle has to give way. Where a table of restitution falls so steeply that several
    speeds do, it is the greatest.

    Parameters
    ----------
    ball_in, ball_out : (3,) m/s
    mass_ratio : ball's mass over the paddle's effective mass along the normal

    Returns
    -------
    normal : (3,), speed_m_s : float

    Raises
    ------
    NoContact
        The two velocities are equal.
    """
    before, after = np.asarray(ball_in, dtype=float), np.asarray(ball_out, dtype=float)
    change = after - before
    if np.linalg.norm(change) < LEAST_CHANGE_M_S:
        raise NoContact("the ball's velocity does not change, so nothing strikes it")
    normal = _face(before, change, contact)
    push = float(change @ normal) * (1 + mass_ratio)
    return normal, float(before @ normal) + _approach(push, contact)


def _face(ball_in: Array, change: Array, contact: Contact) -> Array:
    """Unit normal of the face whose push and friction together give a change of velocity.

    The face stands in the plane of ball_in and the change, turned from the change by an angle whose tangent is
    friction impulse over push: that of gripping, j_t = -k v_t with k = grip_share, or, if less, the friction.
    """
    size = float(np.linalg.norm(change))
    along = change / size
    aside = ball_in - (ball_in @ along) * along
    across = float(np.linalg.norm(aside))
    if across <= ROUNDING * float(np.linalg.norm(ball_in)):
        return along
    k = grip_share(contact)
    rest = size + k * float(ball_in @ along)
    if k * across <= contact.friction * rest:
        turned = rest * along + k * aside
    else:
        turned = along + contact.friction * aside / across
    return np.asarray(turned / np.linalg.norm(turned))


def _approach(push_m_s: float, contact: Contact) -> float:
    """Greatest speed of approach a with (1 + e(a)) a = push, in m/s; the push of a paddle that does not give.

    Between two rows of a table the left side is a quadratic that is concave or goes up; going down from above,
    the first row below the push ends the piece that holds the greatest root.
    """
    rows = contact.restitution_at or ((0.0, contact.restitution),)
    at, slope = len(rows) - 1, 0.0
    while at >= 0 and (1 + rows[at][1]) * rows[at][0] > push_m_s:
        at -= 1
    if at < 0:
        return push_m_s / (1 + rows[0][1])
    speed, value = rows[at]
    if at + 1 < len(rows):
        slope = (rows[at + 1][1] - value) / (rows[at + 1][0] - speed)
    b = 1 + value - slope * speed
    root = float(np.sqrt(max(0.0, b * b + 4 * slope * push_m_s)))
    return 2 * push_m_s / (b + root) if b > 0 else (root - b) / (2 * slope)
