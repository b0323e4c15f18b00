"""From strike to strike: what no joint passes against a linear programme, quintics, and shares against the measure."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from rally_case import again, bench, court_of, gantry_cell, on_bench, on_gantry, ways_by_programme
from scipy.interpolate import BPoly

from reach.cell import Array
from reach.evidence.measure import measure
from reach.evidence.rallies import Knots
from reach.rally.court import Court, Point
from reach.rally.cycle import LEGAL, Cycles, least_duration
from reach.rally.fastest import possible, settled_s, shortest_s
from reach.rally.gauge import Gauge
from reach.rally.quintic import Legs, States, legs, motion_of
from reach.strike.setting import Setting

# Speed and acceleration of five joints, one way and the other, invented.
SIDED = {
    "x": {"velocity": [-1.0, 2.0], "acceleration": [-10.0, 5.0]},
    "y": {"velocity": [-3.0, 0.8], "acceleration": [-4.0, 12.0]},
    "z": {"velocity": [-1.5, 1.5], "acceleration": [-8.0, 8.0]},
    "roll": {"velocity": [-0.6, 2.5], "acceleration": [-20.0, 6.0]},
    "pitch": {"velocity": [-2.0, 2.0], "acceleration": [-3.0, 9.0]},
}
NEAR = 0.01  # of a time: STEPS leave the way off by (gain + brake) (time / STEPS)² / 4


@pytest.fixture(scope="module")
def sided() -> Setting:
    return Setting.made(gantry_cell(SIDED))


@pytest.fixture(scope="module")
def seven() -> Court:
    return court_of(on_bench("bench7"))


def by_programme(setting: Setting, begin: States, end: States, time_s: Array, hair: float) -> Array:
    """Whether each joint (m, n) gets there in times (m, n), by the programme; the way may be off by a hair."""
    velocity, acceleration = setting.limits["velocity"], setting.limits["acceleration"]
    good = np.zeros(begin.q.shape, dtype=bool)
    for k, i in np.ndindex(*begin.q.shape):
        v = np.array([velocity.kept_lo[i], velocity.kept_hi[i]])
        a = np.array([acceleration.kept_lo[i], acceleration.kept_hi[i]])
        found = ways_by_programme(begin.v[k, i], end.v[k, i], float(time_s[k, i]), v, a)
        way = end.q[k, i] - begin.q[k, i]
        good[k, i] = found is not None and found[0] - hair <= way <= found[1] + hair
    return good


def pairs(setting: Setting, count: int, seed: int) -> tuple[States, States]:
    """Random states within the velocity limits, less than half a metre or radian apart."""
    rng = np.random.default_rng(seed)
    velocity, n = setting.limits["velocity"], setting.arm.n
    made = [
        States.moving(
            rng.uniform(-0.25, 0.25, (count, n)),
            rng.uniform(velocity.kept_lo, velocity.kept_hi, (count, n)),
        )
        for _ in range(2)
    ]
    return made[0], made[1]


# What no motion passes


def test_the_shortest_time_is_possible_and_a_shorter_one_is_not(sided: Setting) -> None:
    begin, end = pairs(sided, 4, 0)
    least = shortest_s(sided, begin, end)
    assert np.isfinite(least).all() and (least > 0).all()
    assert by_programme(sided, begin, end, least * (1 + NEAR), 1e-9).all()
    # Shorter by more, the way is off by more than the programme's steps leave it.
    assert not by_programme(sided, begin, end, least * 0.985, -1e-9).any()


def test_from_the_settled_time_on_any_time_will_do(sided: Setting) -> None:
    begin, end = pairs(sided, 3, 1)
    settled = settled_s(sided, begin, end)
    for factor in (1 + NEAR, 1.2, 3.0):
        assert by_programme(sided, begin, end, settled * factor, 1e-9).all()


def test_possible_says_what_the_programme_says_at_any_time_also_in_the_gap(sided: Setting) -> None:
    begin, end = pairs(sided, 4, 2)
    least, settled = shortest_s(sided, begin, end), settled_s(sided, begin, end)
    gap = settled > least * 1.2
    assert gap.any()
    told, found = [], []
    rng = np.random.default_rng(3)
    for k in range(len(begin.q)):
        row = slice(k, k + 1)
        tried = [*rng.uniform(0.05, 1.5, 3), *(least[k] + 0.97 * (settled[k] - least[k]))[gap[k]]]
        for time in tried:
            narrow, wide = (
                by_programme(sided, begin.take(row), end.take(row), np.full((1, 5), time), hair)
                for hair in (-5e-4, 5e-4)
            )
            said = possible(sided, begin.take(row), end.take(row), np.array([time]))
            sure = narrow == wide  # by more than the programme's steps
            told.append(said[sure])
            found.append(wide[sure])
    told_all, found_all = np.concatenate(told), np.concatenate(found)
    assert 0.2 < found_all.mean() < 0.9 and len(found_all) > 40
    np.testing.assert_array_equal(told_all, found_all)


def test_a_joint_back_where_it_was_with_its_speed_needs_four_times_speed_over_acceleration(
    sided: Setting,
) -> None:
    """Joint z has 8 m/s² both ways: with 1.2 m/s it is back at once or after 4 v / a, never between."""
    v = np.zeros((1, 5))
    v[0, 2] = 1.2
    state = States.moving(np.zeros((1, 5)), v)
    back_s = 4 * 1.2 / 8.0
    assert shortest_s(sided, state, state)[0, 2] == pytest.approx(0.0, abs=1e-12)  # s
    assert settled_s(sided, state, state)[0, 2] == pytest.approx(back_s, rel=1e-12)
    assert possible(sided, state, state, np.array([0.0]))[0, 2]
    for share, good in ((0.05, False), (0.5, False), (0.999, False), (1.001, True), (4.0, True)):
        assert possible(sided, state, state, np.array([share * back_s]))[0, 2] == good


def test_with_no_acceleration_known_a_joint_only_needs_its_speed() -> None:
    setting = Setting.made(gantry_cell({"x": {"acceleration": None}, "y": {"velocity": 2.0}}))
    begin = States.moving(np.zeros((1, 5)), np.full((1, 5), 0.5))
    end = States.moving(np.full((1, 5), 0.3), np.full((1, 5), -0.5))
    assert shortest_s(setting, begin, end)[0, 0] == pytest.approx(0.3 / 4.0, rel=1e-6)


# Quintics


def test_legs_are_the_quintics_of_another_library() -> None:
    rng = np.random.default_rng(4)
    ends = [States(*rng.normal(size=(3, 6, 4))) for _ in range(2)]
    time = rng.uniform(0.1, 2.0, 6)
    share = np.linspace(0.0, 1.0, 17)
    made = legs(ends[0], ends[1], time)
    for k in range(6):
        data = [np.stack([state.q[k], state.v[k], state.a[k]]) for state in ends]
        outside = BPoly.from_derivatives([0.0, time[k]], data)
        for order in range(4):
            expected = outside.derivative(order)(share * time[k]) if order else outside(share * time[k])
            scale = np.abs(expected).max()
            np.testing.assert_allclose(made.at(share, order)[k], expected, atol=1e-10 * scale)


@pytest.fixture
def knots() -> Knots:
    """Rest, two passes with speed, rest; no knot but the first on the control grid."""
    rng = np.random.default_rng(5)
    q, v, a = rng.normal(size=(3, 4, 3))
    v[[0, -1]] = a[[0, -1]] = 0.0
    return Knots(np.array([0.0, 0.4013, 0.9127, 1.5004]), q, v, a, (0.4013,))


def test_a_motion_keeps_its_knots_to_a_twelfth_of_the_period_squared(knots: Knots) -> None:
    period = 0.001
    motion = motion_of(knots, period)
    q, v, _ = motion.at(knots.t_s)
    whole = BPoly.from_derivatives(knots.t_s, np.stack([knots.q, knots.v, knots.a], axis=1))
    times = np.linspace(0.0, knots.t_s[-1], 4001)
    jerk = np.abs(whole.derivative(3)(times)).max()
    acceleration = np.abs(whole.derivative(2)(times)).max()
    assert np.abs(q - knots.q).max() <= period**2 / 12 * acceleration + period**3 * jerk  # rad
    assert np.abs(v - knots.v).max() <= period**2 / 8 * jerk  # rad/s, the chord's sag
    rows = knots.t_s[-1] - motion.t_s[:-1] >= period  # the last period is cut short
    np.testing.assert_allclose(motion.v[:-1][rows], whole.derivative()(motion.t_s[:-1][rows]), atol=1e-9)


def test_a_motion_integrates_exactly_and_ends_at_rest(knots: Knots) -> None:
    motion = motion_of(knots, 0.001)
    period = motion.period_s
    np.testing.assert_allclose(motion.v[1:], motion.v[:-1] + motion.a[:-1] * period, atol=1e-12)
    np.testing.assert_allclose(
        motion.q[1:], motion.q[:-1] + motion.v[:-1] * period + motion.a[:-1] * period**2 / 2, atol=1e-12
    )
    assert not motion.v[-1].any() and not motion.a[-1].any() and not motion.v[0].any()


# Shares of the limits at the nodes, against the measure


def moves(court: Court, count: int, seed: int) -> tuple[Gauge, Legs, States, States]:
    """Legs between passing states near the court's stance, as quick as the nodes let them be."""
    rng = np.random.default_rng(seed)
    gauge, n = court.kit.gauge, court.kit.setting.arm.n
    begin, end = (
        States.moving(
            court.stances[0] + 0.05 * rng.normal(size=(count, n)), 0.3 * rng.normal(size=(count, n))
        )
        for _ in range(2)
    )
    time = least_duration(gauge, begin, end)
    good = np.isfinite(time)
    assert good.sum() >= count / 2
    begin, end = begin.take(good), end.take(good)
    return gauge, legs(begin, end, time[good]), begin, end


def measured(setting: Setting, leg: Legs, begin: States, end: States, k: int) -> dict[tuple[str, str], float]:
    """Largest share of each kept-back limit but position over one leg on the control grid."""
    q, v, a = (np.stack([getattr(begin, x)[k], getattr(end, x)[k]]) for x in "qva")
    motion = motion_of(Knots(np.array([0.0, leg.duration_s[k]]), q, v, a, ()), setting.period_s)
    found = {}
    for use in measure(setting.arm, setting.chain, setting.limits, motion).uses:
        if use.kept_hi is None or use.kept_lo is None or use.limit in ("position", "duty"):
            continue
        limit = np.where(use.series[:-2] >= 0, use.kept_hi, use.kept_lo)  # its end is not at rest
        found[use.limit, use.joint or ""] = float(np.max(use.series[:-2] / limit))
    return found


@pytest.mark.parametrize("name", ["bench7", "bench6"])
def test_what_the_nodes_let_pass_keeps_every_limit_measured_as_a_whole(name: str, seven: Court) -> None:
    """Dry friction makes the torque's rate peak within milliseconds where a joint turns around."""
    court = seven if name == "bench7" else court_of(on_bench("bench6"))
    gauge, made, begin, end = moves(court, 40, 6)
    told = gauge.uses(made)
    missed, kinds = 0.0, set()
    for k in range(len(made.duration_s)):
        for pair, share in measured(court.kit.setting, made, begin, end, k).items():
            assert share <= 1.0, (k, pair)
            if share > 0.2:
                kinds.add(pair[0])
            missed = max(missed, share - float(told[k, gauge.columns.index(pair)]))
    assert missed <= 1 - LEGAL  # of a limit: what is kept back for it
    assert kinds >= {"velocity", "acceleration", "torque", "torque rate"}


def test_position_counts_one_at_the_end_of_travel_and_more_past_it(sided: Setting) -> None:
    gauge = Gauge(sided)
    lo, hi = sided.ends
    for past, over in ((-1e-3, False), (1e-3, True)):
        at = States.at_rest(np.repeat((hi + past)[None], 1, axis=0))
        uses = gauge.uses(legs(at, at, np.array([1.0])))[0]
        columns = [k for k, (kind, _) in enumerate(gauge.columns) if kind == "position"]
        assert (uses[columns] > 1).all() == over and (uses[columns] > 0.9).all()
    middle = States.at_rest(((lo + hi) / 2)[None])
    assert gauge.uses(legs(middle, middle, np.array([1.0])))[0, 0] == 0.0


# Ways between strikes


def test_a_way_is_in_time_and_legal_or_it_is_none(seven: Court) -> None:
    """A legal way by rest takes what its parts take, latency or not."""
    court = again(seven)
    cycles = Cycles(court.kit.gauge, court.stances[0], 0.01, 0.06)
    _, _, begin, end = moves(court, 12, 7)
    flight = np.full(len(begin.q), 0.5)
    ways = cycles.ways(begin, end, flight)
    assert ways.legal.any()
    for k in np.flatnonzero(ways.legal & ways.rest):
        assert cycles.rest_s(ways.stop_s, ways.start_s)[k] <= flight[k]
    assert (ways.uses[ways.legal] <= LEGAL).all()


def test_until_the_ball_is_seen_the_arm_does_what_it_does_for_any_ball(seven: Court) -> None:
    """Before the latency is over, the way must not depend on where the next strike is."""
    cycles = Cycles(seven.kit.gauge, seven.stances[0], 0.01, 0.05)
    _, _, begin, _ = moves(seven, 6, 8)
    stop = cycles.stop_s(begin)
    known = np.full(len(stop), 0.05 - 0.005)
    middle = cycles.turn(begin, stop, known)
    ready = States.at_rest(np.repeat(seven.stances[:1], len(begin.q), axis=0))
    alone = legs(begin, ready, stop)
    share = known / stop
    for order, state in enumerate(middle):
        np.testing.assert_allclose(state, alone.at(share[:, None], order)[:, 0], atol=1e-9)


def test_the_shortest_cycle_is_no_shorter_than_any_joint_alone(seven: Court) -> None:
    cycles = Cycles(seven.kit.gauge, seven.stances[0], 0.01, 0.0)
    _, _, begin, end = moves(seven, 12, 9)
    found, uses = cycles.shortest(begin, end)
    least = shortest_s(seven.kit.setting, begin, end).max(axis=1)
    done = np.isfinite(found)
    assert done.any() and (found[done] >= least[done]).all()
    assert (uses[done].max(axis=1) <= LEGAL).all()


def test_half_a_gantry_cycle_by_hand() -> None:
    """From rest to rest over d, a quintic peaks at 10/√3 d/T² of acceleration: the time is known (common practice)."""
    setting = Setting.made(gantry_cell())
    a, d = 40.0, 0.1
    begin, end = States.at_rest(np.zeros((1, 5))), States.at_rest(np.array([[d, 0.0, 0.0, 0.0, 0.0]]))
    expected = np.sqrt(10 / np.sqrt(3) * d / a)
    assert least_duration(Gauge(setting), begin, end)[0] == pytest.approx(expected, rel=0.01)


def test_the_arms_of_the_project_have_friction() -> None:
    """Else the check of the torque's rate shows nothing."""
    for name in ("bench7", "bench6"):
        joints: Any = bench(name).arm.joints
        assert all(joint.limits.friction for joint in joints)


def test_a_gantry_plays_a_ball_by_its_slides_alone() -> None:
    court = court_of(on_gantry((0.2,), offsets_m=(0.1,)))
    (exchange,) = court.exchanges([Point(0.2, 0.1, 0.7)], 0)
    assert exchange is not None
    played = court.players[0].play([exchange], 0.0)
    np.testing.assert_allclose(
        played.v[:, :3],
        [strike.speed_m_s * strike.normal for strike in exchange.strikes],
        atol=1e-6,  # m/s
    )
    np.testing.assert_allclose(played.v[:, 3:], 0.0, atol=1e-6)  # rad/s
