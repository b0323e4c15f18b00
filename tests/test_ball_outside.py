"""The ball against figures from outside: bounce rules, drag, published coefficients, two bodies, another simulator."""

from __future__ import annotations

import math

import numpy as np
import pytest

from reach.ball import Air, Flight, fall, impact, launch, strike_for
from reach.cell import Ball, Contact, Vec3

G = 9.81
DOWN: Vec3 = (0.0, 0.0, -G)
VACUUM = Air(0.0, 0.0, DOWN)
ORIGIN = (0.0, 0.0, 0.0)
UP = (0.0, 0.0, 1.0)


def table_tennis(drag: float) -> Air:
    """Air of a ball of 2.7 g and 40 mm (ITTF Technical Leaflet T3) with a drag coefficient, at 1.2 kg/m³."""
    return Air.of(Ball(0.0027, 0.020, drag_coefficient=drag, air_kg_m3=1.2), DOWN)


def rebound(air: Air, drop_m: float, e: float) -> float:
    """Height to which a ball dropped onto a still face comes back."""
    out, _ = impact(fall(air, drop_m, ORIGIN), UP, ORIGIN, Contact(e))
    return Flight(0.0, np.zeros(3), out, np.zeros(3), air).apex()[1]


DROPS = {
    "ITTF Law 2.1.3: about 23 cm from 30 cm": (0.30, 0.23, 0.8756, 5e-5),
    "ITTF leaflet T3 B.7, least": (0.305, 0.240, 0.8871, 5e-5),
    "ITTF leaflet T3 B.7, most of celluloid": (0.305, 0.260, 0.9233, 5e-5),
    "ITTF leaflet T3 B.7, most of others": (0.305, 0.265, 0.9321, 5e-5),
    "old 38 mm ball, least": (0.305, 0.235, 0.878, 5e-4),
    "old 38 mm ball, most": (0.305, 0.255, 0.914, 5e-4),
    "ITF Rules of Tennis, Appendix I, least": (2.54, 1.35, 0.729, 5e-4),
    "ITF Rules of Tennis, Appendix I, most": (2.54, 1.47, 0.761, 5e-4),
}


@pytest.mark.parametrize("rule", DROPS)
def test_a_ball_of_the_rules_bounces_as_high_as_they_say(rule: str) -> None:
    """e = sqrt(h_out/h_in) to the digits given; as high as they say within what the last digit of e is worth."""
    drop, height, e, digit = DROPS[rule]
    assert math.sqrt(height / drop) == pytest.approx(e, abs=digit)
    assert rebound(VACUUM, drop, e) == pytest.approx(height, abs=2 * e * digit * drop)


TERMINAL = [(0.40, 9.37), (0.45, 8.84), (0.50, 8.38)]


@pytest.mark.parametrize(("drag", "speed"), TERMINAL)
def test_terminal_speed(drag: float, speed: float) -> None:
    """Sphere's drag coefficient 0.4 to 0.5 at Reynolds numbers 1e4 to 1e5 (from memory); m g = rho A Cd v²/2."""
    air = table_tennis(drag)
    dropped = Flight(0.0, np.zeros(3), np.zeros(3), np.zeros(3), air)
    assert -dropped.one(15.0)[5] == pytest.approx(speed, abs=0.005)
    shot_down = Flight(0.0, np.zeros(3), np.array((3.0, 0, -30.0)), np.zeros(3), air)
    assert -shot_down.one(15.0)[5] == pytest.approx(speed, abs=0.005)
    assert -fall(air, 200.0, ORIGIN)[2] == pytest.approx(speed, abs=0.005)


def test_drag_of_a_table_tennis_ball() -> None:
    """k = rho A Cd/(2 m) = 0.112 to 0.140 per m."""
    assert [table_tennis(drag).drag_per_m for drag in (0.4, 0.5)] == pytest.approx([0.112, 0.140], abs=5e-4)


@pytest.mark.parametrize("drag", [0.40, 0.45, 0.50])
@pytest.mark.parametrize("height", [0.05, 0.3, 2.0])
def test_straight_up_and_down_with_drag(drag: float, height: float) -> None:
    """v_down² = (g/k)(1 - exp(-2kh)), v_up² = (g/k)(exp(2kh) - 1); up atan(v_up sqrt(k/g))/sqrt(gk), down
    acosh(exp(kh))/sqrt(gk): textbook, quadratic drag along a line."""
    air = table_tennis(drag)
    k = air.drag_per_m
    made = launch(air, ORIGIN, ORIGIN, height)
    v_up = math.sqrt(G / k * math.expm1(2 * k * height))
    v_down = math.sqrt(-G / k * math.expm1(-2 * k * height))
    seconds = (math.atan(v_up * math.sqrt(k / G)) + math.acosh(math.exp(k * height))) / math.sqrt(G * k)
    np.testing.assert_allclose(made.velocity, (0, 0, v_up), rtol=0, atol=1e-9)
    np.testing.assert_allclose(made.landing_velocity, (0, 0, -v_down), rtol=0, atol=1e-9)
    np.testing.assert_allclose(fall(air, height, ORIGIN), (0, 0, -v_down), rtol=0, atol=1e-14)
    assert made.flight_s == pytest.approx(seconds, abs=1e-10)
    assert Flight(0.0, np.zeros(3), made.velocity, np.zeros(3), air).apex()[1] == pytest.approx(
        height, abs=1e-9
    )


BIASED = [
    (0.30, 0.23, {0.0: 0.8756, 0.40: 0.902, 0.45: 0.905, 0.50: 0.909}),
    (0.305, 0.240, {0.0: 0.887, 0.40: 0.914, 0.50: 0.921}),
]


@pytest.mark.parametrize(("drop", "height", "values"), BIASED)
def test_restitution_from_drop_heights_is_too_low_by_what_drag_takes(
    drop: float, height: float, values: dict[float, float]
) -> None:
    """30 cm to 23 cm is e = 0.8756 in vacuum and 0.902, 0.905, 0.909 in air; 305 mm to 240 mm 0.914 to 0.921."""
    for drag, e in values.items():
        air = table_tennis(drag)
        came, left = fall(air, drop, ORIGIN)[2], launch(air, ORIGIN, ORIGIN, height).velocity[2]
        assert -left / came == pytest.approx(e, abs=5e-4)
        assert rebound(air, drop, -left / came) == pytest.approx(height, abs=1e-9)


def test_drag_asks_for_a_fifth_to_a_quarter_more_paddle_speed() -> None:
    """At an apex of 0.3 m, e = 0.85: Cd = 0.40 and 0.45 on a ball of 2.7 g and 40 mm; 0.50 asks for a little more.

    The paddle gives what bounce and air take. From v_up²/v_down² = exp(2kh), to first order in kh the speed goes up by
    kh/2 · (1 + e)/(1 - e), so the share depends on e: 0.17 at e = 0.80, 0.28 at 0.8756.
    """

    def paddle_speed(air: Air, e: float) -> float:
        up = launch(air, ORIGIN, ORIGIN, 0.3).velocity
        normal, speed = strike_for(fall(air, 0.3, ORIGIN), up, Contact(e))
        np.testing.assert_allclose(normal, UP, atol=1e-12)
        return speed

    for drag in (0.40, 0.45):
        assert 0.20 < paddle_speed(table_tennis(drag), 0.85) / paddle_speed(VACUUM, 0.85) - 1 < 0.25
    for e in (0.80, 0.85, 0.8756):
        air = table_tennis(0.45)
        more = paddle_speed(air, e) / paddle_speed(VACUUM, e) - 1
        assert more == pytest.approx(air.drag_per_m * 0.3 / 2 * (1 + e) / (1 - e), rel=0.02)


SOLID = 0.4
ELASTIC = Contact(1.0, friction=1e6, tangential_restitution=1.0)


def test_a_solid_elastic_ball_bounces_back_and_forth() -> None:
    """Garwin, Am. J. Phys. 37 (1969) 88: his map applied twice gives the first state back, and keeps the energy."""
    random = np.random.default_rng(1)
    for v, w in random.normal(size=(100, 2)):
        state = (v, w)
        for _ in range(2):
            out, spin = impact(
                (state[0], 0, -1), UP, ORIGIN, ELASTIC, spin_m_s=(0, state[1], 0), inertia_share=SOLID
            )
            wanted = (3 / 7 * state[0] + 4 / 7 * state[1], 10 / 7 * state[0] - 3 / 7 * state[1])
            assert (out[0], spin[1]) == pytest.approx(wanted, abs=1e-13)
            assert out[0] ** 2 + SOLID * spin[1] ** 2 == pytest.approx(v**2 + SOLID * w**2, rel=1e-12)
            state = (out[0], spin[1])
        assert state == pytest.approx((v, w), abs=1e-12)


@pytest.mark.parametrize(("share", "factor"), [(2 / 3, 2.5), (SOLID, 3.5)])
def test_slip_turns_to_grip_at_a_sharp_speed(share: float, factor: float) -> None:
    """Brody 1984 (from memory): grips below mu (1 + e)(1 + 1/alpha)|v_n|; beyond, the change is -mu (1 + e)|v_n|."""
    e, mu, down = 0.85, 0.25, 2.4
    edge = factor * mu * (1 + e) * down
    for slip in (0.9999 * edge, 1.0001 * edge):
        out, spin = impact((slip, 0, -down), UP, ORIGIN, Contact(e, friction=mu), inertia_share=share)
        grips = abs(out[0] - spin[1]) < 1e-12
        assert grips == (slip < edge)
        assert out[0] - slip == pytest.approx(-mu * (1 + e) * down, rel=2e-4)


def test_no_energy_comes_of_ten_thousand_impacts_on_a_paddle_that_gives() -> None:
    """Ball, its spin and a paddle free to give along the normal; momentum along it is kept.

    One-dimensional collision v1' = (m1 v1 + m2 v2 + m2 e (v2 - v1))/(m1 + m2): textbook, from memory.
    """
    random = np.random.default_rng(29)
    worst = -math.inf
    for _ in range(10_000):
        n = random.normal(size=3)
        n /= np.linalg.norm(n)
        e, e_t, mu = random.uniform(0.01, 1), random.uniform(-1, 1), random.choice([0, 0.1, 0.5, 3])
        ratio, share = random.choice([0.0, 0.0024, 0.052, 1.0, 20.0]), random.choice([2 / 3, SOLID])
        v, w = random.normal(size=3) * 5, random.normal(size=3) * random.choice([0, 1, 20])
        v -= 2 * max(0.0, v @ n) * n
        pair = Contact(e, friction=mu, tangential_restitution=e_t)
        out, spin = impact(v, n, ORIGIN, pair, w, ratio, share)
        wanted = (ratio - e) * (v @ n) / (1 + ratio)
        assert out @ n == pytest.approx(wanted, rel=1e-9, abs=1e-12)
        gave = -ratio * (out - v) @ n
        assert gave - out @ n == pytest.approx(e * (v @ n), rel=1e-9, abs=1e-12)
        before = v @ v + share * w @ w
        after = out @ out + share * spin @ spin + (gave**2 / ratio if ratio else 0.0)
        worst = max(worst, (after - before) / before)
    assert worst < 1e-12


def test_the_ball_on_an_arm_that_gives() -> None:
    """Two unit links with point masses at (0, 90°): M = [[3, 1], [1, 1]], J = [[-1, -1], [1, 0]], so that the effective
    mass is 1 kg along x and 2 kg along y (Lynch & Park, Modern Robotics, ch. 8, from memory).

    Impulse on arm and ball from the equations of motion, M dq = J' n p (Walker, IEEE T-RA 10 (1994) 670).
    """
    inertia, jacobian = np.array([[3.0, 1], [1, 1]]), np.array([[-1.0, -1], [1, 0]])
    ball, e = 0.0577, 0.75
    rates = np.array((0.3, -0.8))
    for axis, mass in ((0, 1.0), (1, 2.0)):
        n = np.zeros(2)
        n[axis] = 1
        into = -3.0 * n + jacobian @ rates
        terms = np.zeros((4, 4))
        terms[:2, :2], terms[:2, 3] = inertia, jacobian.T @ n
        terms[2, 2], terms[2, 3] = ball, -1
        terms[3, :2], terms[3, 2] = -n @ jacobian, 1
        known = np.array((0, 0, 0, -(1 + e) * (into - jacobian @ rates) @ n))
        change = np.linalg.solve(terms, known)
        paddle = np.array((*jacobian @ rates, 0))
        out, _ = impact((*into, 0), (*n, 0), paddle, Contact(e), mass_ratio=ball / mass)
        assert out[axis] == pytest.approx(into[axis] + change[2], rel=1e-12)


@pytest.mark.parametrize("ratio", [0.0024, 0.052, 0.5])
def test_the_strike_of_a_paddle_that_gives_makes_the_wanted_ball(ratio: float) -> None:
    table = ((1.0, 0.92), (3.0, 0.8), (8.0, 0.65))
    random = np.random.default_rng(6)
    for pair in (
        Contact(0.8),
        Contact(0.8, friction=0.3, tangential_restitution=0.2),
        Contact(0.8, 0.0, table, 0.1),
    ):
        for v_in, v_out in random.normal(size=(200, 2, 3)) * 3:
            normal, speed = strike_for(v_in, v_out, pair, ratio)
            out, _ = impact(v_in, normal, speed * normal, pair, mass_ratio=ratio)
            np.testing.assert_allclose(out, v_out, atol=1e-9)
            _, still = strike_for(v_in, v_out, pair)
            assert speed > still


STIFFNESS_PER_S2, STEP_S = 4e6, 2e-6  # contact of some 1.6 ms in 800 steps

LEAST_FRICTION = 1e-5  # of the simulator, which takes no 0


def damping(e: float) -> float:
    """Share of critical damping with which a linear spring and damper that can't pull gives a restitution.

    e = exp(-z (pi - atan(2 z w/(w² - z²)))/w), w = sqrt(1 - z²): the body leaves when the force is gone, not when the
    spring is at rest (T. Schwager and T. Poeschel, Granular Matter 9 (2007) 465; from memory).
    """
    low, high = 0.0, 0.6
    for _ in range(60):
        z = (low + high) / 2
        w = math.sqrt(1 - z * z)
        gives = math.exp(-z / w * (math.pi - math.atan2(2 * z * w, w * w - z * z)))
        low, high = (z, high) if gives > e else (low, z)
    return low


def simulated(
    e: float, mu: float, v: Vec3, w: Vec3, share: float, stick_per_s: float
) -> tuple[np.ndarray, np.ndarray]:
    """Velocity and spin (radius times rate) of a ball in MuJoCo right after it has left a plane.

    Friction there strives to end the slip at a rate. Its convex contact also lifts a ball that can't be held, by mu
    times the acceleration along the face that friction lacks; the rate must be small where the ball slips and great,
    beside the 1.6 ms of contact, where it grips.
    """
    mujoco = pytest.importorskip("mujoco")
    m, r = 0.0027, 0.02
    damper = 2 * damping(e) * math.sqrt(STIFFNESS_PER_S2)
    inertia = share * m * r * r
    model = mujoco.MjModel.from_xml_string(f"""
<mujoco>
  <option timestep="{STEP_S}" cone="elliptic" impratio="100" gravity="0 0 0" tolerance="1e-14" iterations="200"/>
  <worldbody>
    <geom name="face" type="plane" size="5 5 1"/>
    <body pos="0 0 {r + 1e-5}"><freejoint/>
      <inertial pos="0 0 0" mass="{m}" diaginertia="{inertia} {inertia} {inertia}"/>
      <geom name="ball" type="sphere" size="{r}"/></body>
  </worldbody>
  <contact>
    <pair geom1="face" geom2="ball" condim="3" friction="{mu} {mu} 0 0 0" solimp="0.9999 0.9999 0.001 0.5 2"
      solref="{-STIFFNESS_PER_S2} {-damper}" solreffriction="-1 {-stick_per_s}"/>
  </contact>
</mujoco>""")
    data = mujoco.MjData(model)
    data.qvel[:] = (*v, *np.array(w) / r)  # the body's axes stand along the world's at the start
    met = False
    for _ in range(5000):
        mujoco.mj_step(model, data)
        if met and data.ncon == 0:
            break
        met = met or data.ncon > 0
    assert met and data.ncon == 0
    turn = np.zeros(9)
    mujoco.mju_quat2Mat(turn, data.qpos[3:7])
    return data.qvel[:3].copy(), turn.reshape(3, 3) @ data.qvel[3:6] * r


BOUNCES = {
    "straight": (0.85, 0.0, (0.0, 0.0, -2.4), (0.0, 0.0, 0.0), 2 / 3),
    "straight, dull": (0.5, 0.0, (0.0, 0.0, -2.4), (0.0, 0.0, 0.0), 2 / 3),
    "frictionless, oblique": (0.85, 0.0, (1.0, 0.5, -2.4), (2.0, 1.0, 3.0), 2 / 3),
    "slips": (0.85, 0.05, (5.0, 0.0, -2.0), (0.0, 0.0, 0.0), 2 / 3),
    "slips by its spin": (0.8, 0.05, (0.0, 0.0, -2.0), (3.0, -4.0, 1.0), 2 / 3),
    "slips, solid": (0.8, 0.05, (3.0, 4.0, -2.0), (1.0, 0.0, 0.0), SOLID),
    "grips": (0.85, 1.0, (0.2, 0.0, -2.4), (0.0, 0.1, 0.0), 2 / 3),
    "grips, solid": (0.85, 1.0, (0.2, -0.1, -2.4), (0.0, 0.0, 0.0), SOLID),
}


@pytest.mark.parametrize("case", BOUNCES)
def test_impact_agrees_with_a_simulated_one(case: str) -> None:
    """A rigid-body simulator's contact of spring, damper and Coulomb friction.

    Velocity along the normal within 2 % of what it was. Along the face and in the spin the change where the ball slips,
    mu (1 + e)|v_n|, within 3 % (it sinks in by 1 mm, which shortens the arm of friction by 2 %), and the velocity
    where it grips and leaves rolling within 2 % of the slip it came with.
    """
    e, mu, v, w, share = BOUNCES[case]
    out, spin = simulated(e, mu, v, w, share, 5000.0 if "grips" in case else 200.0)
    wanted, wanted_spin = impact(v, UP, ORIGIN, Contact(e, friction=mu), w, inertia_share=share)
    assert out[2] == pytest.approx(wanted[2], abs=0.02 * abs(v[2]))
    rubbed = max(mu, LEAST_FRICTION) * (1 + e) * abs(v[2])
    slip = float(np.linalg.norm((np.array(v) - np.cross(w, UP))[:2]))
    near = 0.02 * slip if "grips" in case else 0.03 * rubbed if mu else 1.01 * rubbed
    np.testing.assert_allclose(out[:2], wanted[:2], rtol=0, atol=near)
    np.testing.assert_allclose(spin, wanted_spin, rtol=0, atol=near / share)
    left = float(np.linalg.norm((out - np.cross(spin, UP))[:2]))
    if "slips" in case:
        assert float(np.linalg.norm((out - v)[:2])) == pytest.approx(rubbed, rel=0.03)
        assert left > 0.8 * slip
    if "grips" in case:
        assert left < 0.02 * slip
