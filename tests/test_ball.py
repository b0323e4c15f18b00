"""Contact of ball and face against published coefficients, its energy, and the strike that undoes it."""

from __future__ import annotations

import subprocess
import sys

import numpy as np
import pytest

from reach.ball import HOLLOW, NoContact, impact, restitution, strike_for
from reach.cell import Contact

UP = (0.0, 0.0, 1.0)
STILL = (0.0, 0.0, 0.0)
TABLE = ((1.0, 0.92), (3.0, 0.8), (8.0, 0.65))


Rows = tuple[tuple[float, float], ...]


def contact(e: float = 0.8, mu: float = 0.0, e_t: float = 0.0, table: Rows = ()) -> Contact:
    return Contact(e, restitution_at=table, friction=mu, tangential_restitution=e_t)


# Apex h, speed at contact v, and paddle speed for e = 0.7, 0.8, 0.8756 that returns the ball to it. Textbook
# u = (v+ + e v-)/(1 + e) with v = sqrt(2 g h), g = 9.81 (from memory; recomputed with numpy).
APEXES = [
    (1.4007, (0.2472, 0.1556, 0.0929)),
    (1.9809, (0.3496, 0.2201, 0.1314)),
    (2.4261, (0.4281, 0.2696, 0.1609)),
    (4.4294, (0.7817, 0.4922, 0.2938)),
]


@pytest.mark.parametrize(("speed", "paddle"), APEXES)
def test_strike_that_keeps_a_ball_up(speed: float, paddle: tuple[float, ...]) -> None:
    for e, wanted in zip((0.7, 0.8, 0.8756), paddle, strict=True):
        normal, u = strike_for((0, 0, -speed), (0, 0, speed), contact(e, mu=0.3, e_t=0.2))
        np.testing.assert_allclose(normal, UP, atol=1e-15)
        assert u == pytest.approx(wanted, abs=6e-5)
        out, spin = impact((0, 0, -speed), UP, (0, 0, wanted), contact(e))
        np.testing.assert_allclose(out, (0, 0, speed), atol=2e-4)
        np.testing.assert_array_equal(spin, 0)


def coefficients(e_t: float, alpha: float = HOLLOW) -> np.ndarray:
    """[[v'/v, v'/Rw], [Rw'/v, Rw'/Rw]] of a face that grips whatever comes; slip is v - Rw."""
    grips = contact(1.0, mu=1e6, e_t=e_t)
    rolled, spun = impact((1, 0, -1), UP, STILL, grips, inertia_share=alpha)
    turned, still_spun = impact((0, 0, -1), UP, STILL, grips, spin_m_s=(0, 1, 0), inertia_share=alpha)
    return np.array([[rolled[0], turned[0]], [spun[1], still_spun[1]]])


def test_solid_elastic_ball() -> None:
    """R. L. Garwin, Am. J. Phys. 37 (1969) 88: solid ball, I = 2/5 m R^2, tangential restitution 1."""
    expected = [[3 / 7, 4 / 7], [10 / 7, -3 / 7]]
    np.testing.assert_allclose(coefficients(1.0, 0.4), expected, rtol=1e-14)


@pytest.mark.parametrize(("alpha", "row"), [(2 / 3, (0.6, 0.4)), (0.4, (5 / 7, 2 / 7))])
def test_ball_that_leaves_rolling(alpha: float, row: tuple[float, float]) -> None:
    """R. Cross, Am. J. Phys. 70 (2002) 1093 (formula from memory): e_x = 0; thin shell and solid ball."""
    np.testing.assert_allclose(coefficients(0.0, alpha), [row, row], rtol=1e-14)


@pytest.mark.parametrize("e_t", [-0.5, 0.24, 0.76])
def test_coefficients_of_a_hollow_ball(e_t: float) -> None:
    """v' = [(1 - a e_x) v + a (1 + e_x) Rw]/(1 + a), Rw' = [(a - e_x) Rw + (1 + e_x) v]/(1 + a), a = 2/3 (Cross)."""
    a = 2 / 3
    expected = np.array([[1 - a * e_t, a * (1 + e_t)], [1 + e_t, a - e_t]]) / (1 + a)
    np.testing.assert_allclose(coefficients(e_t), expected, rtol=1e-13)


@pytest.mark.parametrize(("alpha", "factor"), [(2 / 3, 2.5), (0.4, 3.5)])
def test_where_grip_gives_way_to_slip(alpha: float, factor: float) -> None:
    """A ball grips below slip = mu (1 + e) (1 + 1/alpha) |v_n| (Brody 1984, from memory), and slips beyond."""
    e, mu, down = 0.8, 0.2, 2.0
    edge = factor * mu * (1 + e) * down
    for share in (0.5, 0.999, 1.001, 3.0):
        out, spin = impact((share * edge, 0, -down), UP, STILL, contact(e, mu), inertia_share=alpha)
        left = out[0] - spin[1]
        if share < 1:
            assert left == pytest.approx(0, abs=1e-12)
        else:
            assert left == pytest.approx((share - 1) * edge, rel=1e-9)
            assert out[0] == pytest.approx(share * edge - mu * (1 + e) * down, rel=1e-12)


def test_spin_about_the_normal_and_no_friction_change_nothing() -> None:
    out, spin = impact((0, 0, -2), UP, STILL, contact(0.5, mu=1), spin_m_s=(0, 0, 3))
    np.testing.assert_allclose(out, (0, 0, 1))
    np.testing.assert_array_equal(spin, (0, 0, 3))
    out, spin = impact((1, 2, -2), UP, STILL, contact(0.5, mu=0, e_t=0.9), spin_m_s=(4, 5, 6))
    np.testing.assert_allclose(out, (1, 2, 1))
    np.testing.assert_array_equal(spin, (4, 5, 6))


def units(random: np.random.Generator, count: int) -> np.ndarray:
    vectors = random.normal(size=(count, 3))
    return np.asarray(vectors / np.linalg.norm(vectors, axis=1)[:, None])


def test_a_still_paddle_gives_no_energy() -> None:
    random = np.random.default_rng(11)
    gained = []
    for normal in units(random, 10_000):
        e, e_t, mu = random.uniform(0.01, 1), random.uniform(-1, 1), random.choice([0, 0.1, 0.5, 2])
        v, w = random.normal(size=3) * 5, random.normal(size=3) * random.choice([0, 1, 20])
        v -= 2 * max(0.0, v @ normal) * normal
        out, spin = impact(v, normal, STILL, contact(e, mu, e_t), w)
        before, after = v @ v + 2 / 3 * w @ w, out @ out + 2 / 3 * spin @ spin
        gained.append((after - before) / before)
        assert out @ normal == pytest.approx(-e * (v @ normal), rel=1e-9, abs=1e-12)
    assert max(gained) < 1e-12
    assert min(gained) < -0.5


def test_a_moving_face_is_the_still_one_seen_from_it() -> None:
    random = np.random.default_rng(3)
    pair = contact(0.7, 0.3, 0.2)
    for normal in units(random, 200):
        v, u, w = random.normal(size=(3, 3))
        v -= ((v - u) @ normal + 1) * normal
        out, spin = impact(v, normal, u, pair, w)
        seen, seen_spin = impact(v - u, normal, STILL, pair, w)
        np.testing.assert_allclose(out, seen + u, atol=1e-13)
        np.testing.assert_allclose(spin, seen_spin, atol=1e-13)


@pytest.mark.parametrize("ball_in", [(0, 0, 1), (1, 0, 0.5), (3, 0, 0.4)])
def test_ball_that_does_not_approach(ball_in: tuple[float, float, float]) -> None:
    with pytest.raises(NoContact, match="does not approach the face"):
        impact(ball_in, UP, (0, 0, 0.4), contact())


def test_restitution_by_speed() -> None:
    assert restitution(contact(0.85), 3.0) == 0.85
    tabled = contact(0.85, table=TABLE)
    for speed, value in (
        (0.0, 0.92),
        (1.0, 0.92),
        (2.0, 0.86),
        (3.0, 0.8),
        (5.5, 0.725),
        (8, 0.65),
        (99, 0.65),
    ):
        assert restitution(tabled, speed) == pytest.approx(value, rel=1e-14)
    out, _ = impact((0, 0, -2), UP, STILL, tabled)
    assert out[2] == pytest.approx(2 * 0.86)
    out, _ = impact((0, 0, -2), UP, (0, 0, 1), tabled)
    assert out[2] == pytest.approx(1 + 3 * 0.8)


CONTACTS = {
    "frictionless": contact(),
    "friction": contact(0.8, mu=0.2),
    "grip": contact(0.8, mu=5, e_t=0.6),
    "slides back": contact(0.9, mu=0.4, e_t=1.0),
    "table": contact(table=TABLE),
    "table and friction": contact(mu=0.25, e_t=0.1, table=TABLE),
    "rising table": contact(mu=0.25, table=((10.0, 0.1), (10.1, 1.0))),
    "steeply falling table": contact(mu=0.25, table=((4.0, 0.9), (4.1, 0.2), (9.0, 0.2))),
    "one row": contact(table=((2.0, 0.7),)),
}


@pytest.mark.parametrize("pair", CONTACTS.values(), ids=CONTACTS)
def test_strike_makes_the_ball_that_was_wanted(pair: Contact) -> None:
    random = np.random.default_rng(5)
    for _ in range(500):
        v_in, v_out = random.normal(size=(2, 3)) * random.choice([0.3, 4, 15], size=(2, 1))
        normal, u = strike_for(v_in, v_out, pair)
        assert np.linalg.norm(normal) == pytest.approx(1, abs=1e-14)
        out, _ = impact(v_in, normal, u * normal, pair)
        np.testing.assert_allclose(out, v_out, atol=1e-9)


def test_frictionless_strike_is_along_the_change() -> None:
    """n || v_out - v_in, u_n = (v_out.n + e v_in.n)/(1 + e), written out for one ball."""
    normal, u = strike_for((1.0, 0.0, -2.0), (-1.0, 0.0, 2.0), contact(0.5))
    np.testing.assert_allclose(normal, np.array([-2, 0, 4]) / np.sqrt(20))
    assert u == pytest.approx((np.sqrt(5) - 0.5 * np.sqrt(5)) / 1.5)


def test_friction_turns_the_face() -> None:
    """The face that slips stands atan(mu) off the change, on the side that the ball slides to."""
    v_in, v_out = np.array([8.0, 0.0, -1.0]), np.array([7.0, 0.0, 2.0])
    normal, _ = strike_for(v_in, v_out, contact(0.8, mu=0.1))
    change = (v_out - v_in) / np.linalg.norm(v_out - v_in)
    assert np.tan(np.arccos(normal @ change)) == pytest.approx(0.1, rel=1e-9)
    assert normal[0] > change[0]
    grips, _ = strike_for(v_in, v_out, contact(0.8, mu=10))
    wanted = (v_out - v_in) + 0.4 * v_in  # a rolling hollow ball keeps 0.6 of its speed along the face
    np.testing.assert_allclose(grips, wanted / np.linalg.norm(wanted), rtol=1e-12)


def test_greatest_of_several_speeds() -> None:
    """(1 + e(a)) a = 7.4 holds at 7.4/1.9 = 3.895, on the fall, and at 7.4/1.2 = 6.167."""
    falling = contact(table=((4.0, 0.9), (4.1, 0.2), (9.0, 0.2)))
    _, u = strike_for((0, 0, -1), (0, 0, 6.4), falling)
    assert u == pytest.approx(7.4 / 1.2 - 1)


def test_table_that_leaps() -> None:
    """From one float to the next e goes from 0.1 to 1, so (1 + e) a = 400 holds at that float, 300."""
    leaping = contact(table=((300.0, 0.1), (float(np.nextafter(300, 301)), 1.0)))
    _, u = strike_for((0, 0, -200), (0, 0, 200), leaping)
    assert u == pytest.approx(100, rel=1e-12)


def test_face_that_gives_way() -> None:
    """A ball that leaves a still face at 0.8 of its speed and is to leave at 0.5: u = (0.5 - 0.8)/1.8 of it."""
    _, u = strike_for((0, 0, -1), (0, 0, 0.5), contact(0.8))
    assert u == pytest.approx(-0.3 / 1.8)
    normal, u = strike_for((0, 0, -10), (0, 0, -9), contact(0.8, mu=0.5, e_t=1.0))
    np.testing.assert_allclose(normal, UP)
    assert u == pytest.approx(-10 + 1 / 1.8)


def test_equal_velocities_are_no_strike() -> None:
    with pytest.raises(NoContact, match="does not change"):
        strike_for((1, 2, 3), (1, 2, 3), contact())


def test_it_stands_on_numpy_alone() -> None:
    code = "import sys, reach.ball as b; from reach.cell import Contact\n"
    code += "b.strike_for((1, 0, -2), (0, 0, 2), Contact(0.8, friction=0.2)); print(*sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert "scipy" not in {name.partition(".")[0] for name in done.stdout.split()}
