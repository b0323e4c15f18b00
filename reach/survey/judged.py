"""What is written into the rows of a survey: verdict, basis, and the reason in words."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reach.ball import restitution
from reach.cell import Array, Cell
from reach.evidence.measure import measure
from reach.evidence.points import STRAIGHT
from reach.limits.build import unknown_limits
from reach.strike.bound import covering_bound
from reach.strike.impact import hit
from reach.strike.setting import Setting
from reach.strike.stroke import DUTY, Demonstration, motion_along
from reach.survey.family import Folds
from reach.survey.grid import Strikes
from reach.survey.rows import Rows
from reach.survey.stops import IMPACT, Stop
from reach.survey.weigh import Shown, Weighed, largest
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

PROVED, DEMONSTRATED, SEARCHED = "proved", "demonstrated", "searched"
REACH, SINGULARITY = "reach", "singularity"
MOST_LIVELY = 0.99  # restitution from which a ball that is kept up would come at no sensible speed


class Scribe:
    """Writes rows.

    Parameters
    ----------
    origin (3,), length : first joint and how far the links reach from it, m
    """

    def __init__(self, cell: Cell, setting: Setting, folds: Folds, origin: Array, length: float):
        self._cell, self._setting, self._folds = cell, setting, folds
        self._origin, self._length = origin, length
        self._unstated = [pair for pair in unknown_limits(setting.limits) if pair[0] != DUTY]
        lacking = {limit for limit, _ in self._unstated} | {
            DUTY
        }  # one stroke is no cycle: duty is never looked at
        self._unknown = [limit for limit in cell.accept.require if limit in lacking]
        velocity = setting.limits["velocity"]
        self._fastest = np.maximum(velocity.kept_hi, -velocity.kept_lo)

    def unreached(self, rows: Rows, owner: NDArray[np.int64]) -> None:
        """Strikes that no posture was found for."""
        gap = np.linalg.norm(rows.strikes.position - self._origin, axis=1) - self._length
        for k in np.setdiff1d(np.arange(len(rows)), owner).tolist():
            if gap[k] > 0:
                basis, text = PROVED, f"{gap[k]:.3f} m farther from the first joint than the links reach"
            else:
                basis, text = SEARCHED, f"no posture found from {rows.get(k, 'starts')} starts"
            rows.set(k, verdict=NOT_DELIVERABLE, basis=basis, limit=REACH, reason=text)

    def bounds(self, rows: Rows, weighed: Weighed) -> None:
        """The upper bounds over all postures compared, along the normal, each with posture and dual vector."""
        strikes, found, above = rows.strikes, weighed.found, weighed.above
        along = np.einsum("mi,mi->m", strikes.direction, strikes.normal)
        for name, speed, dual in (
            ("still", above.still, above.dual_still),
            ("free", above.free, above.dual_free),
        ):
            at = largest(speed, found.owner, len(rows))
            has = at >= 0
            rows.values[f"bound_{name}_m_s"][has] = speed[at[has]] * along[has]
            rows.values[f"q_{name}"][has], rows.values[f"dual_{name}"][has] = found.q[at[has]], dual[at[has]]

    def motion(self, rows: Rows, k: int, shown: Shown) -> None:
        """A strike's fastest motion, its posture, and what a hit does there."""
        normal, direction = rows.strikes.normal[k], rows.strikes.direction[k]
        along = float(direction @ normal)
        for number, speed in shown.families.items():
            rows.values["family_demonstrated_m_s"][k, number] = speed * along
        best = shown.best
        if best is None:
            return
        rows.profiles[k] = best.profile
        if self._unstated:
            rows.peaks[k] = self._peaks(best, float(rows.strikes.required_m_s[k]) / along)
        if best.kind == STRAIGHT:
            rows.motions[k] = best.motion
        approach = approach_speed(self._cell, normal, float(rows.strikes.required_m_s[k]))
        contact = self._cell.contact
        e = restitution(contact, approach) if contact is not None and np.isfinite(approach) else np.nan
        struck = hit(self._setting.arm, best.q, normal, self._cell.ball, e, approach)
        rows.set(
            k,
            demonstrated_m_s=best.speed * along,
            q=best.q,
            tangent=best.tangent,
            stroke=best.kind,
            family=self._folds.families[int(self._folds.numbers(best.q[None])[0])],
            effective_mass_kg=struck.effective_mass_kg,
            to_limit_share=self._to_limit(best.q),
            approach_m_s=approach,
            velocity_jump=struck.velocity_jump,
            joint_impulse=struck.joint_impulse,
            ball_impulse=struck.ball_impulse,
        )

    def _peaks(self, best: Demonstration, need: float) -> Array:
        """What a strike asks of each limit that nobody stated, in its own unit: at the required speed where it is
        faster than that, else as fast as it is."""
        measured = best.measured
        if best.speed > need:
            motion, _ = motion_along(
                best.curve, best.profile.slowed(need / best.speed), self._setting.period_s
            )
            measured = measure(self._setting.arm, self._setting.chain, self._setting.limits, motion)
        peaks = {(use.limit, use.joint): abs(use.peak) for use in measured.uses}
        return np.array([peaks[pair] for pair in self._unstated])

    def verdict(self, rows: Rows, k: int, stop: Stop) -> None:
        """A reached strike's verdict from its two sides."""
        required = float(rows.strikes.required_m_s[k])
        done = float(rows.get(k, "demonstrated_m_s"))
        bound = float(rows.get(k, "bound_still_m_s" if self._setting.still else "bound_free_m_s"))
        count = int(rows.get(k, "postures"))
        shown = f"demonstrated {done:.3f}" if np.isfinite(done) else "no safe motion found"
        text = f"{shown}, upper bound {bound:.3f}, required {required:.3f} m/s; {count} postures compared"
        verdict = self._word(done, bound, required)
        basis = {DELIVERABLE: DEMONSTRATED}.get(verdict, SEARCHED)
        if verdict == NOT_DELIVERABLE and self._covered(rows.strikes, k) < required:
            basis = PROVED
        if done >= required and self._unknown:
            stop = Stop(self._unknown[0])
            text = f"{', '.join(self._unknown)} unknown; on the others {text}"
        rows.set(
            k, verdict=verdict, basis=basis, reason=text, limit=stop.limit, joint=stop.joint, phase=stop.phase
        )

    def word(self, strikes: Strikes, k: int, shown: Shown) -> str:
        """The verdict on a strike, whose bound allows it, from its motions."""
        along = float(strikes.direction[k] @ strikes.normal[k])
        done = shown.best.speed * along if shown.best is not None else np.nan
        return self._word(done, np.inf, float(strikes.required_m_s[k]))

    def _word(self, done: float, bound: float, required: float) -> str:
        if done >= required:
            return UNDECIDED if self._unknown else DELIVERABLE
        return NOT_DELIVERABLE if bound < required else UNDECIDED

    def stopped_at(self, weighed: Weighed, index: int) -> Stop:
        """What leaves a posture without any safe motion."""
        posture = weighed.pick[index]
        if weighed.above.own(self._setting.still)[posture] == 0:
            return Stop(SINGULARITY, "", IMPACT)
        q = weighed.found.q[posture]
        load, torque = self._setting.arm.static_torque(q), self._setting.limits["torque"]
        over = np.maximum(load - torque.kept_hi, torque.kept_lo - load)
        worst = int(np.argmax(over))
        if over[worst] > 0:
            return Stop("torque", self._setting.arm.names[worst], IMPACT)
        return Stop("position", self._setting.arm.names[self._nearest_end(q)])

    def _covered(self, strikes: Strikes, k: int) -> float:
        """A speed along the normal that no posture whatever passes."""
        position, direction = strikes.position[k : k + 1], strikes.direction[k : k + 1]
        joints = float(covering_bound(self._setting.chain, self._fastest, position, direction)[0])
        return min(joints, self._setting.tool_cap_m_s) * float(strikes.direction[k] @ strikes.normal[k])

    def _to_limit(self, q: Array) -> float:
        """Least distance of a joint to its end: 1 in mid-range, 0 at the end; 1 where none has ends."""
        position = self._setting.limits["position"]
        half = (position.hi - position.lo) / 2
        room = np.minimum(position.hi - q, q - position.lo)
        shares = np.where(np.isfinite(half), room / np.where(np.isfinite(half), half, 1.0), 1.0)
        return float(np.clip(shares.min(), 0.0, 1.0))

    def _nearest_end(self, q: Array) -> int:
        lo, hi = self._setting.ends
        return int(np.argmin(np.minimum(hi - q, q - lo)))


def approach_speed(cell: Cell, normal: Array, paddle_m_s: float) -> float:
    """Speed at which ball and face meet, m/s; nan where there is no ball.

    With the ball's velocity given it follows; else the ball is one that is kept up: it comes back as fast as it leaves,
    u (1 + e) / (1 - e) at a paddle speed u.
    """
    if cell.ball is None or cell.contact is None:
        return float("nan")
    ball_in = cell.survey.ball_in_m_s if cell.survey is not None else None
    if ball_in is not None:
        return paddle_m_s - float(np.asarray(ball_in) @ normal)
    e = min(cell.contact.restitution, MOST_LIVELY)
    return 2 * paddle_m_s / (1 - e)
