"""A survey as the library runs it: the sweep, both sides of each strike, what stops it, what would help."""

from __future__ import annotations

from dataclasses import replace
from functools import partial
from itertools import pairwise
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from survey_case import (
    UP,
    arm_cell,
    asked,
    boxed,
    faces_of,
    grid_of,
    listed,
    looker,
    of_kind,
    same,
    struck,
    swept,
)

import reach
import reach.survey.judged as judged_module
import reach.survey.look as look_module
import reach.survey.sweep as sweep_module
from reach.cell import Accept, Array, Cell, Tool, Vec3
from reach.errors import InputError
from reach.evidence.points import Points
from reach.strike.bound import covering_bound
from reach.strike.setting import Setting
from reach.strike.sides import upper
from reach.survey.grid import Strikes
from reach.survey.inverse import Found
from reach.survey.sweep import STOPPED
from reach.variants import (
    one_limit_scaled,
    raised_base,
    scaled_limits,
    with_bounds,
    without_margins,
)
from reach.verdict import Verdict, judge_survey

SAME_SPEED = 1e-6  # relative
HAIR = 1 + 1e-9


@pytest.fixture(scope="module")
def bench() -> Cell:
    """The seven-axis arm and 36 strikes, some too far."""
    return boxed(arm_cell("bench7"), (0.35, -0.2, 0.3), (0.95, 0.2, 0.7), 0.2, 0.8, run_up_m=0.3)


@pytest.fixture(scope="module")
def surveyed(bench: Cell) -> reach.SurveyResult:
    """The answer on it."""
    return reach.survey_strikes(bench, advice=False)


@pytest.fixture(scope="module")
def points(surveyed: reach.SurveyResult) -> Points:
    """Its rows."""
    return surveyed.evidence.points


def links(speed_m_s: float | Array = 1.0, count: int = 6, **survey: Any) -> Cell:
    """The two-link arm and strikes of postures with the elbow either way, along the last link's own normal.

    Only j2 moves in them, so that the bound is the last link's length times the velocity that j2 keeps to.
    """
    rng = np.random.default_rng(1)
    bend = rng.uniform(0.5, 1.2, count) * np.where(np.arange(count) % 2, -1, 1)
    q = np.column_stack([rng.uniform(-0.5, 1.0, count), bend])
    cell = replace(arm_cell("link2"), accept=Accept(strike_window_s=0.001))
    setting = Setting.of(listed(cell, np.zeros((1, 3)), UP, 1.0))
    return listed(cell, *faces_of(setting, q), speed_m_s, rotation="free", **survey)


LINKS_M_S = 0.4 * 5.0 * 0.98  # length, velocity of j2, and what the margin leaves of it


def quick(cell: Cell) -> Points:
    """Rows of a cell's strikes without what stops them."""
    look, grid = looker(cell), grid_of(cell)
    return look.judge(grid, look.search(grid), Found.none(look.setting.arm.n)).points


@pytest.fixture
def verdicts_alone(monkeypatch: pytest.MonkeyPatch) -> None:
    """Surveys without the optimisation, without what stops strikes, and without how they stand with no margins."""
    monkeypatch.setattr(sweep_module, "Looker", partial(look_module.Looker, full=False))


@pytest.fixture
def cheap(monkeypatch: pytest.MonkeyPatch) -> None:
    """Without the optimisation, which takes its time and has no say in bounds."""
    monkeypatch.setattr("reach.survey.weigh.exact", lambda *_, **__: None)


# The grid


def test_a_box_goes_x_slowest_then_y_z_and_face() -> None:
    faces = np.array([[0.0, 0.0, 1.0], [0.6, 0.0, 0.8]])
    cell = boxed(arm_cell("bench7"), (0.4, 0.0, 0.3), (0.5, 0.1, 0.5), 0.1, 0.5, faces)
    grid = grid_of(cell)
    assert len(grid) == 2 * 2 * 3 * 2
    np.testing.assert_allclose(grid.position[:3], [[0.4, 0, 0.3], [0.4, 0, 0.3], [0.4, 0, 0.4]])
    np.testing.assert_allclose(grid.position[6], [0.4, 0.1, 0.3])
    np.testing.assert_allclose(grid.position[-1], [0.5, 0.1, 0.5])
    np.testing.assert_array_equal(grid.normal[:4], faces[[0, 1, 0, 1]])


@pytest.mark.parametrize(
    ("low", "high", "faces", "shape"),
    [
        ((0.5, 0.0, 0.4), (0.5, 0.0, 0.4), UP, (1, 1, 1, 1)),
        ((0.4, 0.0, 0.4), (0.6, 0.2, 0.4), UP, (2, 2, 1, 1)),
        (
            (0.5, 0.0, 0.4),
            (0.5, 0.0, 0.4),
            np.array([[0.0, 0, 1], [0.6, 0, 0.8], [-0.6, 0, 0.8]]),
            (1, 1, 1, 3),
        ),
    ],
    ids=["one point", "flat", "faces"],
)
@pytest.mark.usefixtures("verdicts_alone")
def test_small_boxes(low: Vec3, high: Vec3, faces: Array, shape: tuple[int, ...]) -> None:
    cell = boxed(arm_cell("bench7"), low, high, 0.2, 0.4, faces, run_up_m=0.3)
    result = reach.survey_strikes(cell, advice=False)
    assert result.evidence.shape == shape
    assert result.evidence.points.verdict.tolist() == ["deliverable"] * int(np.prod(shape))
    assert result.verdict.verdict == "deliverable" and result.verdict.exit_code == 0


def test_listed_strikes_have_no_shape_and_their_own_speeds() -> None:
    cell = links(np.array([0.5, 0.5, 3.0, 0.5, 3.0, 0.5]))
    result = reach.survey_strikes(cell, advice=False)
    assert result.evidence.shape is None
    assert of_kind(result.evidence.points, "not deliverable").tolist() == [2, 4]
    np.testing.assert_allclose(result.evidence.points.bound_free_m_s, LINKS_M_S, rtol=1e-9)
    np.testing.assert_allclose(result.evidence.points.demonstrated_m_s, LINKS_M_S, rtol=5e-3)


# The same answer whoever works, and in any order


def test_workers_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sweep_module, "CHUNK", 2)
    cell = struck("bench6", 3, 1, 0.5, 0.4, run_up_m=0.2)
    one, two = swept(cell), swept(cell, workers=2)
    assert "deliverable" in one.verdict.tolist()
    same(one, two)


def test_another_seed_is_another_search_with_the_same_verdicts() -> None:
    cell = links()
    one, other = swept(cell), swept(cell, seed=1)
    assert one.verdict.tolist() == other.verdict.tolist()


@pytest.mark.campaign  # a second run and two workers give the same bytes by default, in test_properties.py
@pytest.mark.usefixtures("verdicts_alone")
def test_order_changes_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    # Chunks that are not whole lines of the grid, so that other strikes come together. What stops them is left out.
    monkeypatch.setattr(sweep_module, "CHUNK", 4)
    cell = boxed(arm_cell("bench7"), (0.4, -0.3, 0.3), (0.7, 0.3, 0.3), 0.3, 0.4, run_up_m=0.1)
    grid = grid_of(cell)
    order = np.random.default_rng(1).permutation(len(grid))
    one, other = swept(cell), swept(cell, grid.take(order))
    assert one.verdict[order].tolist() == other.verdict.tolist()
    for name in ("bound_still_m_s", "bound_free_m_s", "demonstrated_m_s"):
        np.testing.assert_allclose(
            getattr(other, name), getattr(one, name)[order], rtol=SAME_SPEED, err_msg=name
        )


# Failures and interrupts


@pytest.mark.parametrize("where", ["look.weigh", "look.show", "judged.hit", "look.improved"])
def test_a_posture_that_fails_leaves_its_own_row_undecided(
    where: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    cell = links(np.array([0.5, 0.5, 0.5, 3.0]), count=4)
    before = swept(cell)
    name = f"reach.survey.{where}"
    real = getattr(look_module if where.startswith("look") else judged_module, where.split(".")[1])
    marked = grid_of(cell).position[1]

    def failing(*given: Any) -> Any:
        if where == "judged.hit":
            hopeless = np.allclose(given[0].pose(given[1])[0], marked, atol=1e-6)
        else:
            places = {"look.show": lambda: given[1].position, "look.weigh": lambda: given[2].position}.get(
                where, lambda: given[2]
            )()
            hopeless = bool((np.abs(places - marked).max(axis=1) < 1e-9).any())
        if hopeless:
            raise np.linalg.LinAlgError("made by the test")
        return real(*given)

    monkeypatch.setattr(name, failing)
    after = swept(cell)
    assert after.verdict[1] == "undecided" and after.reason[1] == "failed numerically: made by the test"
    assert np.isnan(after.demonstrated_m_s[1])
    others = [0, 2, 3]
    assert after.verdict[others].tolist() == before.verdict[others].tolist()
    assert after.verdict[others].tolist() == ["deliverable", "deliverable", "not deliverable"]
    np.testing.assert_allclose(
        after.demonstrated_m_s[others], before.demonstrated_m_s[others], rtol=SAME_SPEED
    )
    np.testing.assert_allclose(after.bound_free_m_s[others], before.bound_free_m_s[others], rtol=SAME_SPEED)


def test_nan_is_never_deliverable(monkeypatch: pytest.MonkeyPatch) -> None:
    real = look_module.show

    def without_speed(*given: Any) -> Any:
        shown = real(*given)
        return {k: replace(one, best=replace(one.best, speed=np.nan)) for k, one in shown.items()}

    monkeypatch.setattr(look_module, "show", without_speed)
    points = swept(links(0.5, count=3))
    assert "deliverable" not in points.verdict.tolist()
    assert not points.margin_free.any()


def interrupted(monkeypatch: pytest.MonkeyPatch, task: str, calls: int) -> None:
    """Let a task of the sweep be interrupted after so many calls."""
    real, done = getattr(sweep_module, task), []

    def work(*given: Any) -> Any:
        if len(done) == calls:
            raise KeyboardInterrupt
        done.append(1)
        return real(*given)

    monkeypatch.setattr(sweep_module, task, work)
    monkeypatch.setattr(sweep_module, "CHUNK", 2)


def test_an_interrupt_leaves_what_is_done(monkeypatch: pytest.MonkeyPatch) -> None:
    interrupted(monkeypatch, "_judge", 2)
    result = reach.survey_strikes(links(0.5), advice=True)
    points = result.evidence.points
    assert points.verdict.tolist() == ["deliverable"] * 4 + ["undecided"] * 2
    assert points.reason[4:] == (STOPPED, STOPPED)
    assert result.evidence.stopped and result.verdict.verdict == "undecided"
    assert "stopped" in result.verdict.sentence and result.headroom_text == "not looked for"
    assert "survey" not in sweep_module._kept


def test_an_interrupt_can_leave_a_settled_verdict(monkeypatch: pytest.MonkeyPatch) -> None:
    interrupted(monkeypatch, "_judge", 2)
    for speed, share, verdict in (
        (0.5, 0.5, "deliverable"),
        (3.0, 0.8, "not deliverable"),
        (3.0, 0.3, "undecided"),
    ):
        monkeypatch.undo()
        interrupted(monkeypatch, "_judge", 2)
        result = reach.survey_strikes(links(speed, required_share=share), advice=False)
        assert result.evidence.stopped and result.verdict.verdict == verdict
        assert "stopped" in result.verdict.sentence


def test_an_interrupt_among_the_postures_leaves_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    interrupted(monkeypatch, "_search", 1)
    result = reach.survey_strikes(links(0.5), advice=True)
    assert result.evidence.points.verdict.tolist() == ["undecided"] * 6
    assert result.evidence.stopped and result.verdict.verdict == "undecided"


def test_an_interrupt_of_the_advice_keeps_the_survey(monkeypatch: pytest.MonkeyPatch) -> None:
    interrupted(monkeypatch, "_again", 0)
    result = reach.survey_strikes(links(np.array([0.5, 3.0] * 3)), advice=True)
    assert of_kind(result.evidence.points, "deliverable").tolist() == [0, 2, 4]


def test_a_cell_without_strikes_is_bad_input() -> None:
    with pytest.raises(InputError, match=r"survey: the cell has no \[survey\] table"):
        reach.survey_strikes(arm_cell("bench7"))


def test_progress_tells_the_time_left(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sweep_module, "CHUNK", 3)
    said: list[str] = []
    reach.survey_strikes(links(0.5), advice=False, progress=said.append)
    assert said[-1].startswith("survey, strikes: 2 of 2 parts, about 0 s left")
    assert any(line.startswith("survey, postures: 2 of 2") for line in said)


# Both sides


def rows_hold_together(result: reach.SurveyResult) -> None:
    """What must be so of every row of a survey."""
    points = result.evidence.points
    assert result.cell.survey is not None
    setting = Setting.of(result.cell)
    own, dual, q_own = (
        (points.bound_still_m_s, points.dual_still, points.q_still)
        if setting.still
        else (points.bound_free_m_s, points.dual_free, points.q_free)
    )
    done, required = points.demonstrated_m_s, points.required_m_s
    reached = np.isfinite(own)
    assert np.all(done[np.isfinite(done)] <= own[np.isfinite(done)] * HAIR)
    assert np.all(points.bound_still_m_s[reached] <= points.bound_free_m_s[reached] * HAIR)
    for k, verdict in enumerate(points.verdict):
        if not reached[k]:
            assert (verdict, points.limit[k]) == ("not deliverable", "reach")
            assert np.isnan(done[k]) and np.isnan(points.q[k]).all()
            continue
        expected = (
            "deliverable"
            if done[k] >= required[k]
            else "not deliverable"
            if own[k] < required[k]
            else "undecided"
        )
        assert verdict == expected
        assert f"required {required[k]:.3f} m/s" in points.reason[k]
        assert f"upper bound {own[k]:.3f}" in points.reason[k]
        assert points.postures[k] >= 1 and points.starts[k] >= 1
        if verdict == "deliverable":
            assert points.basis[k] == "demonstrated" and points.stroke[k] in ("swing", "straight")
            assert np.isfinite(points.q[k]).all() and np.isfinite(points.tangent[k]).all()
            first, last = points.profiles.first[k : k + 2]
            assert last > first and np.all(points.profiles.duration_s[first:last] >= 0)
            assert points.family[k] in result.evidence.families
            # The strike itself, by Pinocchio: place, face, and the speed per m/s along the direction.
            at, axes, jacobian = setting.arm.jacobian(points.q[k])
            np.testing.assert_allclose(at, points.position[k], atol=1e-8)
            np.testing.assert_allclose(axes[:, 2], points.normal[k], atol=2e-8)
            np.testing.assert_allclose(jacobian[:3] @ points.tangent[k], points.direction[k], atol=1e-6)
        # The dual vector proves the bound of its posture: λᵀd = 1 and Σ max(hi y, lo y) with y = Jᵀλ.
        at, axes, jacobian = setting.arm.jacobian(q_own[k])
        np.testing.assert_allclose(at, points.position[k], atol=1e-8)
        lo, hi = (side[0] for side in setting.velocities(q_own[k : k + 1]))
        y = jacobian.T @ dual[k]
        assert dual[k][:3] @ points.direction[k] == pytest.approx(1.0, abs=1e-9)
        proved = min(float(np.maximum(hi * y, lo * y).sum()), setting.tool_cap_m_s)
        assert proved == pytest.approx(own[k], rel=1e-6)
        if setting.still:  # no part of it along the spin, which a disc has free
            assert abs(dual[k][3:] @ axes[:, 2]) < 1e-7 * max(1.0, np.abs(dual[k]).max())
        else:
            assert np.all(dual[k][3:] == 0)


def test_rows_of_the_bench_hold_together(surveyed: reach.SurveyResult) -> None:
    rows_hold_together(surveyed)
    verdicts = surveyed.evidence.points.verdict.tolist()
    assert verdicts.count("deliverable") > 15 and verdicts.count("not deliverable") > 3


@pytest.mark.campaign  # rows of the bench by default, of random arms in test_random_strikes.py
def test_rows_of_a_published_arm_hold_together() -> None:
    cell = boxed(arm_cell("fer"), (0.35, -0.3, 0.3), (0.65, 0.3, 0.6), 0.3, 0.6, run_up_m=0.2)
    rows_hold_together(reach.survey_strikes(cell, advice=False))


def test_rows_of_turning_paddles_hold_together() -> None:
    rows_hold_together(reach.survey_strikes(links(np.array([0.5, 1.9, 3.0] * 2)), advice=False))


def test_the_covering_bound_is_a_proof() -> None:
    cell = links(20.0)
    points = swept(cell)
    setting = Setting.of(cell)
    fastest = np.maximum(setting.limits["velocity"].kept_hi, -setting.limits["velocity"].kept_lo)
    covered = covering_bound(setting.chain, fastest, points.position, points.direction)
    assert np.all(covered < 20.0) and np.all(covered >= points.bound_free_m_s)
    assert points.basis.tolist() == ["proved"] * 6
    required = (points.bound_free_m_s + covered) / 2  # above what postures allow, below what covers all
    assert swept(asked(cell, speeds_m_s=required)).basis.tolist() == ["searched"] * 6


def test_a_cap_on_the_tool_is_proved_and_named() -> None:
    capped = replace(links(1.0), tool=Tool(0.9, "made by the test"))
    points = swept(capped)
    assert points.verdict.tolist() == ["not deliverable"] * 6
    assert set(points.limit.tolist()) == {"tool speed"} and set(points.basis.tolist()) == {"proved"}
    assert np.all(points.bound_free_m_s <= 0.9) and np.all(points.demonstrated_m_s >= 0.85 * 0.9)


# What must be monotone


@pytest.fixture(scope="module")
def small() -> Cell:
    """Six strikes of the seven-axis arm, easily delivered."""
    return boxed(arm_cell("bench7"), (0.4, -0.3, 0.3), (0.7, 0.3, 0.3), 0.3, 0.4, run_up_m=0.3)


@pytest.fixture(scope="module")
def plain(small: Cell) -> Points:
    """Their rows."""
    return quick(small)


@pytest.fixture(scope="module")
def half(small: Cell) -> tuple[Cell, Points]:
    """At a speed that about half of them deliver, where it matters who is looked at more closely; and the rows."""
    cell = asked(small, speeds_m_s=np.array([1.45]))
    return cell, quick(cell)


@pytest.mark.parametrize(
    "change", [lambda cell: scaled_limits(cell, 1.2), without_margins], ids=["limits at 1.2", "no margins"]
)
def test_looser_limits_lower_no_bound(change: Any, half: tuple[Cell, Points]) -> None:
    cell, tight = half
    loose = quick(change(cell))
    kept = tight.verdict == "deliverable"
    assert "not deliverable" not in loose.verdict[kept].tolist()
    for name in ("bound_still_m_s", "bound_free_m_s"):
        share = getattr(loose, name) / getattr(tight, name)
        assert np.nanmin(share) >= 1 / HAIR, (name, np.sort(share).round(4))


def test_looser_limits_lower_no_bound_of_a_posture(small: Cell, plain: Points) -> None:
    q, along = plain.q_still, grid_of(small).direction
    before = upper(Setting.of(small), q, along)
    for change in (scaled_limits(small, 1.2), without_margins(small)):
        after = upper(Setting.of(change), q, along)
        assert np.all(after.still >= before.still / HAIR) and np.all(after.free >= before.free / HAIR)


@pytest.fixture(scope="module")
def still_and_free(small: Cell) -> tuple[Points, Points]:
    """Rows of a paddle that keeps still and of one that may turn, at a speed that is not easily delivered."""
    cell = asked(small, speeds_m_s=np.array([1.3]))
    return quick(cell), quick(asked(cell, rotation="free"))


def test_a_paddle_that_may_turn_has_no_lower_bound(still_and_free: tuple[Points, Points]) -> None:
    still, free = still_and_free
    assert np.all(free.bound_free_m_s >= still.bound_still_m_s / HAIR)


def test_a_paddle_that_may_turn_delivers_what_a_still_one_does(
    still_and_free: tuple[Points, Points],
) -> None:
    still, free = still_and_free
    done = still.verdict == "deliverable"
    assert done.sum() >= 3
    assert free.verdict[done].tolist() == ["deliverable"] * int(done.sum())


@pytest.mark.campaign  # a remedy's longer run-up is run again by default
def test_a_longer_run_up_is_no_slower(small: Cell, plain: Points) -> None:
    assert small.survey is not None and small.survey.run_up_m == 0.3
    shortest, short, none = (quick(asked(small, run_up_m=m)) for m in (0.05, 0.1, None))
    speeds = [one.demonstrated_m_s for one in (shortest, short, plain, none)]
    for short, longer in pairwise(speeds):
        assert np.all(longer >= 0.99 * short), (longer / short).round(3)
    assert np.median(speeds[1] / speeds[0]) > 1.2


# Unknown limits


def unknown_rate(cell: Cell) -> Cell:
    """The cell with the torque rate of its first two joints unknown."""
    return with_bounds(cell, {("torque rate", j.name): None for j in cell.arm.joints[:2]}, "")


@pytest.fixture(scope="module")
def unstated() -> reach.SurveyResult:
    """A survey whose torque rate nobody stated."""
    return reach.survey_strikes(unknown_rate(links(np.array([0.5, 1.0, 0.5, 1.0, 3.0, 0.5]), run_up_m=0.2)))


def test_an_unknown_limit_leaves_all_undecided(unstated: reach.SurveyResult) -> None:
    points = unstated.evidence.points
    assert unstated.verdict.verdict == "not deliverable"  # one strike is beyond any torque rate
    assert points.verdict.tolist() == ["undecided"] * 4 + ["not deliverable", "undecided"]
    for k in (0, 1, 2, 3, 5):
        assert points.reason[k].startswith("torque rate unknown; on the others demonstrated")
    assert unstated.without_margins == "not deliverable" and not points.margin_free.any()
    some = reach.survey_strikes(asked(unstated.cell, required_share=0.8), advice=False)
    assert some.verdict.verdict == "undecided" and some.verdict.exit_code == 3
    assert "torque rate unknown for j1, j2" in some.verdict.sentence


def test_the_need_of_an_unknown_limit_is_enough(unstated: reach.SurveyResult) -> None:
    needs = {need.joint: need for need in unstated.needs}
    assert set(needs) == {"j1", "j2", None}  # None: the tool, whose speed nobody capped
    values: dict[tuple[str, str | None], float | None] = {}
    for joint in ("j1", "j2"):
        need = needs[joint]
        assert (need.limit, need.unit) == ("torque rate", "N·m/s") and need.sufficient is not None
        assert need.sufficient > 0 and need.text.startswith(
            f"torque rate of {joint}: {need.sufficient:.4g} N·m/s is enough for 90 % of 5 strikes"
        )
        values[("torque rate", joint)] = need.sufficient
    bare = replace(without_margins(with_bounds(unstated.cell, values, "asked for")))
    again = swept(bare)
    assert again.verdict.tolist() == ["deliverable"] * 4 + ["not deliverable", "deliverable"]


def test_headroom_is_not_denied_for_a_limit_that_nobody_stated() -> None:
    result = reach.survey_strikes(unknown_rate(links(0.5, count=2)))
    assert result.verdict.verdict == "undecided"
    assert "not even with all limits" not in result.headroom_text
    assert result.headroom_share is None or "unknown" in result.headroom_text


# The verdict on all


@pytest.mark.parametrize(
    ("done", "lost", "open_ones", "share", "verdict"),
    [
        (4, 0, 0, 1.0, "deliverable"),
        (3, 1, 0, 1.0, "not deliverable"),
        (3, 0, 1, 1.0, "undecided"),
        (2, 1, 1, 1.0, "not deliverable"),
        (3, 1, 0, 0.75, "deliverable"),
        (2, 1, 1, 0.75, "undecided"),
        (2, 2, 0, 0.75, "not deliverable"),
        (2, 0, 2, 0.5, "deliverable"),
        (0, 0, 4, 0.5, "undecided"),
        (1, 3, 0, 0.26, "not deliverable"),
        (1, 3, 0, 0.25, "deliverable"),
        (0, 4, 0, 0.0, "deliverable"),
        (7, 3, 0, 0.7, "deliverable"),  # 0.7 × 10 is a little above 7 in binary
        (69, 31, 0, 0.69, "deliverable"),
        (57, 43, 0, 0.58, "not deliverable"),
    ],
)
def test_the_required_share(done: int, lost: int, open_ones: int, share: float, verdict: str) -> None:
    found = judged(["deliverable"] * done + ["not deliverable"] * lost + ["undecided"] * open_ones, share)
    assert found.verdict == verdict
    assert found.exit_code == {"deliverable": 0, "not deliverable": 1, "undecided": 3}[verdict]
    assert (
        f"{done} of {done + lost + open_ones} strikes deliverable, {lost} not, {open_ones} undecided"
        in found.sentence
    )
    assert "not checked: clearance" in found.sentence


def judged(verdicts: list[str], share: float, stopped: bool = False) -> Verdict:
    evidence: Any = SimpleNamespace(
        points=SimpleNamespace(verdict=np.array(verdicts)),
        kinds=("position", "velocity"),
        unknown=(),
        not_checked=("clearance",),
        stopped=stopped,
    )
    return judge_survey(evidence, share, Accept())


def test_a_stopped_survey_says_so() -> None:
    assert "stopped before all" in judged(["undecided"] * 2, 1.0, stopped=True).sentence


@pytest.mark.usefixtures("verdicts_alone")
def test_enough_out_of_reach_decides() -> None:
    # One within reach, one that no posture is found for, two beyond the links.
    far = boxed(arm_cell("bench7"), (0.5, 0.0, 0.5), (2.0, 0.0, 0.5), 0.5, 0.3, run_up_m=0.3)
    for share, verdict in ((1.0, "not deliverable"), (0.25, "deliverable")):
        result = reach.survey_strikes(asked(far, required_share=share), advice=False)
        assert result.verdict.verdict == verdict
        assert result.evidence.points.basis.tolist() == ["demonstrated", "searched", "proved", "proved"]
        (reason,) = result.reasons
        assert (reason.limit, reason.decides) == ("reach", verdict == "not deliverable")
        assert reason.text == "reach: 3 strikes (3 not deliverable)" and reason.basis == "searched"


def test_reasons_count_the_strikes(surveyed: reach.SurveyResult, points: Points) -> None:
    lacking = points.verdict != "deliverable"
    assert sum(int(r.text.split(": ")[1].split(" ")[0]) for r in surveyed.reasons) == lacking.sum()
    decides = [reason.decides for reason in surveyed.reasons]
    assert decides == sorted(decides, reverse=True)


# What stops a strike


def named(points: Points, limit: str, joint: str) -> float:
    """The share of the strikes that a limit of a joint is said to stop."""
    return float(((points.limit == limit) & (points.joint == joint)).mean())


@pytest.mark.parametrize(
    ("limit", "joint", "factor"),
    [
        ("velocity", "j2", 0.05),
        ("acceleration", "j2", 0.02),
        ("jerk", "j2", 0.002),
        ("torque rate", "j2", 0.02),
    ],
)
def test_a_tiny_limit_of_two_links_is_what_stops(limit: str, joint: str, factor: float, cheap: None) -> None:
    # A short run-up, so that the joints' travel does not matter.
    points = swept(one_limit_scaled(links(0.05, count=2, run_up_m=0.1), limit, joint, factor))
    assert named(points, limit, joint) > 0.5, sorted(zip(points.limit, points.joint, strict=True))


def test_a_tiny_acceleration_stops_without_a_run_up_too(cheap: None) -> None:
    points = swept(one_limit_scaled(links(0.05, count=2), "acceleration", "j2", 0.02))
    assert named(points, "acceleration", "j2") > 0.5, sorted(zip(points.limit, points.joint, strict=True))


def test_a_narrow_travel_stops(cheap: None) -> None:
    cell = links(0.05, count=4)
    narrow = one_limit_scaled(cell, "position", "j2", 0.52)  # ± 1.25, the postures being out to 1.2
    points = swept(narrow)
    reached = points.limit != "reach"
    assert reached.all()
    far = np.abs(points.q[:, 1]) > 1.0
    assert (
        far.any()
        and set(points.limit[far].tolist()) == {"position"}
        and set(points.joint[far].tolist()) == {"j2"}
    )


@pytest.mark.parametrize(
    ("limit", "joint", "factor"),
    [
        pytest.param("velocity", "j3", 0.1, marks=pytest.mark.campaign),  # both on two links above
        ("torque", "j2", 0.2),
        pytest.param("torque rate", "j3", 0.03, marks=pytest.mark.campaign),
    ],
)
def test_a_tiny_limit_of_six_axes_is_what_stops(limit: str, joint: str, factor: float, cheap: None) -> None:
    cell = struck("bench6", 2, 1, 0.05, 0.4, run_up_m=0.1)
    points = swept(one_limit_scaled(cell, limit, joint, factor))
    assert named(points, limit, joint) > 0.5, sorted(zip(points.limit, points.joint, strict=True))


# What would help


def claimed(effect: str) -> tuple[int, int]:
    """How many strikes a remedy says it gains, and of how many."""
    words = effect.split()
    return int(words[0]), int(words[3])


def test_a_tight_limit_is_raised_and_the_count_is_what_a_new_run_gives(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr("reach.survey.remedies.BASE_STEPS_M", ())  # what else would be tried takes its time
    cell = one_limit_scaled(links(np.array([1.0, 1.1, 1.3, 1.4, 1.6, 1.3])), "velocity", "j2", 0.6)
    result = reach.survey_strikes(cell)
    before = result.evidence.points.verdict == "deliverable"
    assert before.sum() == 2
    remedy = next(r for r in result.remedies if r.change.startswith("velocity of j2"))
    assert remedy.verified and "1.25 times" in remedy.change
    after = swept(one_limit_scaled(cell, "velocity", "j2", 1.25)).verdict == "deliverable"
    assert claimed(remedy.effect) == (int((after & ~before).sum()), 4)
    assert f"{100 * after.mean():.1f} % of all then" in remedy.effect


def test_a_longer_run_up_is_found(cheap: None, monkeypatch: pytest.MonkeyPatch) -> None:
    # What else would be tried takes its time.
    monkeypatch.setattr("reach.survey.remedies.BASE_STEPS_M", ())
    monkeypatch.setattr("reach.survey.remedies.LIMITS_TRIED", 0)
    monkeypatch.setattr("reach.survey.remedies._headroom", lambda *_, **__: (None, "left out"))
    cell = links(0.9, count=1, run_up_m=0.02)
    result = reach.survey_strikes(cell)
    assert not (result.evidence.points.verdict == "deliverable").any()
    remedy = next(r for r in result.remedies if "run-up" in r.change)
    metres = float(remedy.change.split()[3])
    after = swept(asked(cell, run_up_m=metres)).verdict == "deliverable"
    assert claimed(remedy.effect) == (1, 1) and after.all()


def test_a_box_that_is_too_high_wants_a_higher_base(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("reach.survey.remedies.BASE_STEPS_M", (0.1, -0.1))  # what else would be tried
    monkeypatch.setattr("reach.survey.remedies.RUN_UPS", ())  # takes its time
    monkeypatch.setattr("reach.survey.remedies.LIMITS_TRIED", 0)
    cell = boxed(arm_cell("bench7"), (0.5, -0.1, 0.9), (0.5, 0.1, 1.1), 0.2, 0.3, run_up_m=0.3)
    result = reach.survey_strikes(cell)
    before = result.evidence.points.verdict == "deliverable"
    assert 0 < before.sum() < 4
    remedy = next(r for r in result.remedies if "base" in r.change)
    assert remedy.change.startswith("raise the base by")
    after = swept(raised_base(cell, float(remedy.change.split()[4]))).verdict == "deliverable"
    gained = int((after & ~before).sum())
    assert claimed(remedy.effect) == (gained, int((~before).sum()))
    assert f"{100 * after.mean():.1f} % of all then" in remedy.effect
    assert "out of reach, which no limit mends" in result.headroom_text and result.headroom_share is None


@pytest.mark.parametrize(("speed_m_s", "share"), [(1.5, 0.2), (1.93, 0.0), (2.1, -0.1)])
def test_headroom_is_what_new_runs_give(speed_m_s: float, share: float) -> None:
    # The bound, and with it the speed, is proportional to the limits: deliverable down to speed / LINKS_M_S of them.
    cell = links(speed_m_s, count=2)
    result = reach.survey_strikes(cell)
    assert result.headroom_share == pytest.approx(share)
    assert result.headroom_text.startswith(f"{100 * share:.0f} %: ")
    held = (swept(scaled_limits(cell, 1 - share)).verdict == "deliverable").all()
    assert held
    lower = {0.2: 0.7, 0.0: 0.95, -0.1: 1.05}[share]
    assert not (swept(scaled_limits(cell, lower)).verdict == "deliverable").all()


def test_nothing_is_missing_nothing_is_proposed() -> None:
    assert reach.survey_strikes(links(1.0, count=2)).remedies == ()


# The answer


def test_the_answer_tells_what_it_left_out(surveyed: reach.SurveyResult) -> None:
    assert surveyed.command == "survey" and not surveyed.failed
    assert "duty" in surveyed.not_checked and "tool speed" in surveyed.not_checked
    assert (surveyed.remedies, surveyed.headroom_share, surveyed.headroom_text) == (
        (),
        None,
        "not looked for",
    )
    assert [(need.limit, need.joint) for need in surveyed.needs] == [("tool speed", None)]
    assert any("no ball and contact" in note for note in surveyed.notes)
    assert surveyed.evidence.outline.shape == (9, 3)
    free = reach.survey_strikes(links(0.5, count=1), advice=False)
    assert any("may turn at the strike" in note for note in free.notes)
    assert any("no run-up is given" in note for note in free.notes)


def test_strikes_can_be_taken_by_rows() -> None:
    grid = grid_of(links(0.5))
    part = grid.take(np.array([1, 3]))
    assert isinstance(part, Strikes) and len(part) == 2
    np.testing.assert_array_equal(part.position, grid.position[[1, 3]])
