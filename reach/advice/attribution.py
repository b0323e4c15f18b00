"""Which limits are behind a shortfall: the steps over which the arm fell behind, and their multipliers."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass, replace

import numpy as np

from reach.advice.blame import BLAME_FROM_M_S, Blame, Blames
from reach.advice.demand import Demand
from reach.arm import Arm
from reach.evidence.record import Reason, Strike
from reach.evidence.strikes import judge_strike
from reach.follow.bench import Run
from reach.follow.drive import behind
from reach.follow.step import task_weight
from reach.kinematics import Chain

LOOKED_AT = 400  # steps of an episode whose multipliers are looked at, evenly spread
CALM_S = 0.05  # a shortfall this long ago, with none since, belongs to an earlier episode
MINOR_SHARE = 0.1  # of the largest gain in an episode: limits below it are left out
SINGULAR_SHARE = 0.5  # of a shortfall that stays without any limit: above it the posture is to blame
STEP_SHARE = 0.3  # of the strike's speed: a command that changes more inside its window is pointed out


@dataclass(frozen=True)
class Episode:
    """Steps first..last (rows) over which the arm fell behind."""

    first: int
    last: int


class Attribution:
    """Blames of a roll, ordered by step, with what the demand asked beside them."""

    def __init__(self, run: Run, demand: Demand | None):
        assert run.roll is not None and run.reference is not None
        self.run, self.roll, self.cell = run, run.roll, run.cell
        self.arm = Arm(run.cell.arm, run.cell.paddle)
        self.uses = {(u.limit, u.joint): u for u in run.evidence.uses}
        self.demand = {(u.limit, u.joint): u for u in demand.measured.uses} if demand else {}
        self.through_drive = None
        if demand is not None and self.cell.drive is not None:
            self.through_drive = behind(self.cell.drive, demand.motion)
        self.blames = Blames(self.cell, self.arm, self.roll)
        self.short = np.flatnonzero(self.roll.shortfall > BLAME_FROM_M_S)
        self.names = self.arm.names

    def time(self, row: int) -> float:
        """Time in s of a row of the motion as sent."""
        return float(self.roll.sent.start_s + row * self.cell.period_s)

    def of_strike(self, strike: Strike) -> list[Reason]:
        """Reasons of one missed strike: its own episode, or whatever came before where the pose error is old."""
        half = self.cell.accept.strike_window_s / 2
        end = int(np.ceil((strike.time_s + half - self.roll.sent.start_s) / self.cell.period_s))
        text = f"strike at {strike.time_s:.3f} s: {', '.join(strike.faults)}" + self._own_step(strike)
        episode = self._episode_before(end)
        found = self.of_episode(episode, True, text, strike) if episode else []
        if not found and len(self.short) and self.short[0] < end:
            found = self.of_episode(Episode(int(self.short[0]), end), True, text, strike)
        if self._drive_alone_misses(strike):
            drive = self.cell.drive
            assert drive is not None
            words = (
                f"{text}: even exact tracking misses behind the drive (delay {1000 * drive.delay_s:g} ms, "
                f"lag {1000 * drive.lag_s:g} ms, jitter ±{1000 * drive.jitter_s:g} ms)"
            )
            found = [replace(reason, decides=False) for reason in found]  # without them it would miss too
            found.insert(0, self._without_limit("drive tracking", strike, words))
        if not found:
            words = f"{text}: no limit held the arm back; the command changes within one control period"
            found = [self._without_limit("control period", strike, words)]
        return found

    def _drive_alone_misses(self, strike: Strike) -> bool:
        """Whether the demanded motion, seen through the drive, misses a strike too."""
        if self.through_drive is None or self.cell.drive is None or self.run.reference is None:
            return False
        chain, accept = Chain.of(self.arm), self.cell.accept
        jitter, wanted = self.cell.drive.jitter_s, self.run.reference.at
        seen = judge_strike(
            strike.time_s, strike.marked, chain, self.through_drive, wanted, accept, jitter, None
        )
        return not seen.delivered

    @staticmethod
    def _without_limit(limit: str, strike: Strike, text: str) -> Reason:
        return Reason(
            decides=True,
            limit=limit,
            joint=None,
            phase="impact",
            time_s=strike.time_s,
            until_s=strike.time_s,
            value=None,
            bound=None,
            unit="",
            basis="demonstrated",
            text=text,
        )

    def _own_step(self, strike: Strike) -> str:
        """Say when the command itself jumps inside the strike's window."""
        assert self.run.reference is not None
        half = self.cell.accept.strike_window_s / 2
        times = strike.time_s + np.linspace(-half, half, 21)
        twist, _, axes = self.run.reference.at(times)
        speed = np.einsum("ki,ki->k", twist[:, :3], axes[:, :, 2])
        if np.ptp(speed) > STEP_SHARE * max(abs(strike.commanded_m_s), 1e-9):
            return f" (the command itself changes by {np.ptp(speed):.2f} m/s inside the acceptance window)"
        return ""

    def _episode_before(self, end: int) -> Episode | None:
        inside = self.short[self.short <= end]
        if len(inside) == 0 or (end - inside[-1]) * self.cell.period_s > CALM_S:
            return None
        gaps = np.flatnonzero(np.diff(inside) * self.cell.period_s > CALM_S)
        first = inside[gaps[-1] + 1] if len(gaps) else inside[0]
        return Episode(int(first), end)

    def of_episode(
        self, episode: Episode, decides: bool, text: str, strike: Strike | None = None
    ) -> list[Reason]:
        """One reason for each limit that mattered in an episode, the weightiest first."""
        gains: dict[tuple[str, int], float] = defaultdict(float)
        spans: dict[tuple[str, int], list[int]] = {}
        stride = 1 + (episode.last - episode.first) // LOOKED_AT
        for step in range(episode.first, episode.last + 1, stride):
            for blame in self.blames.of(step):
                key = (blame.limit, blame.joint)
                gains[key] += blame.gain * self.roll.shortfall[step]
                spans.setdefault(key, [step, step])[1] = step
        singular = self._singular(episode)
        if singular:
            where, value, words = singular
            phase = self._phase(where, strike)
            row = self.time(where)
            return [
                Reason(
                    decides,
                    "singularity",
                    None,
                    phase,
                    row,
                    row,
                    value,
                    None,
                    "",
                    "demonstrated",
                    f"{text}: {words}",
                )
            ]
        if not gains:
            return []
        top = max(gains.values())
        ordered = sorted((k for k in gains if gains[k] >= MINOR_SHARE * top), key=lambda k: -gains[k])
        worst = max(
            (s for s in range(episode.first, episode.last + 1, stride) if self.blames.of(s)),
            key=lambda s: float(self.roll.shortfall[s]),
        )
        any_of = self._not_unique(worst) and len(ordered) > 1
        found = [self._reason(key, spans[key], decides, text, strike, any_of) for key in ordered]
        if any(beyond(reason) for reason in found):  # the others only make up for those
            found = [reason if beyond(reason) else replace(reason, decides=False) for reason in found]
        return found

    def _reason(
        self,
        key: tuple[str, int],
        span: list[int],
        decides: bool,
        text: str,
        strike: Strike | None,
        any_of: bool,
    ) -> Reason:
        limit, index = key
        joint = None if limit == "tool speed" else self.names[index]
        use = self.uses[(limit, joint)]
        value = self._asked(limit, joint, span)
        bound = use.hi if value is None or value >= 0 else use.lo
        words = f"{limit}{f' of {joint}' if joint else ''}"
        if any_of:
            words = f"any one of several limits, among them {words}"
        if value is not None and bound is not None:
            words += f" (exact tracking would ask {value:.4g} {use.unit}, the limit is {bound:.4g}"
            words += ")" if abs(value) > abs(bound) else "; it makes up for other joints)"
        middle = (span[0] + span[1]) // 2
        return Reason(
            decides,
            limit,
            joint,
            self._phase(middle, strike),
            self.time(span[0]),
            self.time(span[1] + 1),
            value,
            bound,
            use.unit,
            "demonstrated",
            f"{text}: {words}",
        )

    def _asked(self, limit: str, joint: str | None, span: list[int]) -> float | None:
        """What exact tracking asks of a limit over a span of rows: the value of largest size."""
        use = self.demand.get((limit, joint))
        if use is None:
            return None
        part = use.series[span[0] : span[1] + 2]
        return float(part[np.argmax(np.abs(part))]) if len(part) else None

    def _singular(self, episode: Episode) -> tuple[int, float, str] | None:
        """Where most of the worst shortfall stays without any limit: row, smallest singular value, words."""
        rows = [s for s in range(episode.first, min(episode.last + 1, len(self.roll.shortfall)))]
        if not rows:
            return None
        worst = max(rows, key=lambda s: float(self.roll.shortfall[s]))
        q = self.roll.sent.q[worst]
        weight = task_weight(self.cell)
        task = self.arm.jacobian(q)[2] * weight[:, None]
        wanted = weight * self.roll.targets[worst]
        left, values, _ = np.linalg.svd(task, full_matrices=True)
        good = values > 1e-3 * values[0]
        within = left[:, : len(values)][:, good]
        out_of_reach = float(np.linalg.norm(wanted - within @ (within.T @ wanted)))
        if out_of_reach < SINGULAR_SHARE * self.roll.shortfall[worst]:
            return None
        smallest = float(values.min()) if len(values) == 6 else 0.0
        words = (
            f"no joint motion produces this direction: {out_of_reach:.3f} m/s of the commanded twist lie "
            f"outside what the arm can move (smallest singular value {smallest:.2g} m)"
        )
        return worst, smallest, words

    def _not_unique(self, step: int) -> bool:
        """Whether the active rows of a step depend on each other, so that their multipliers are not unique."""
        blames: list[Blame] = self.blames.of(step)
        state = self.arm.at(self.roll.sent.q[step], self.roll.sent.v[step])
        rows = [
            state.mass[b.joint] if b.limit in ("torque", "torque rate") else np.eye(self.arm.n)[b.joint]
            for b in blames
        ]
        return len(rows) > 0 and int(np.linalg.matrix_rank(np.array(rows))) < len(rows)

    def _phase(self, row: int, strike: Strike | None) -> str | None:
        """Phase of a row against a strike (the next one where none is given)."""
        time = self.time(row)
        if strike is None:
            strike = next((s for s in self.run.evidence.strikes if s.time_s >= time), None)
            if strike is None:
                return "return" if self.run.evidence.strikes else None
        half = self.cell.accept.strike_window_s / 2
        if abs(time - strike.time_s) <= half:
            return "impact"
        assert self.run.reference is not None
        twist, _, axes = self.run.reference.at(np.array([time]))
        forward = float(twist[0, :3] @ axes[0, :, 2]) * np.sign(strike.commanded_m_s) > 0
        if time < strike.time_s:
            return "run-up" if forward else "backswing"
        return "follow-through" if forward else "return"

    def others(self) -> list[Reason]:
        """What held steps back anywhere, merged by limit and joint, as reasons that decide nothing."""
        if len(self.short) == 0:
            return []
        whole = Episode(int(self.short[0]), int(self.short[-1]))
        worst = float(self.roll.shortfall[self.short].max())
        return self.of_episode(whole, False, f"behind the command by up to {worst:.3f} m/s")


def beyond(reason: Reason) -> bool:
    """Whether exact tracking would ask for more than the limit; so too where that is not known."""
    return reason.value is None or reason.bound is None or abs(reason.value) > abs(reason.bound)
