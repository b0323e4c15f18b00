"""What was understood of a cell, in words: `describe`."""

from __future__ import annotations

import textwrap

import numpy as np

from reach.advice.reading import better_reading, reading_in_words, stamp_statistics
from reach.arm import Arm
from reach.cell import Array, Bound, Cell
from reach.follow.contacts import aslant, contacts
from reach.follow.reference import build_reference
from reach.limits.base import Limit
from reach.limits.build import build_limits, not_checked
from reach.paddle import paddle_mass
from reach.report.alike import once

WIDTH, COLUMN = 100, 11  # of the text, and where its second column begins


def describe_cell(cell: Cell) -> str:
    """Text on arm, chain, paddle, every limit with its source, static load, and what can't be checked yet."""
    arm = Arm(cell.arm, cell.paddle)
    start = None if cell.arm.start is None else np.array(cell.arm.start)
    limits = build_limits(cell)
    blocks = [
        _arm_lines(cell, arm),
        _start_lines(cell, arm, start),
        _limit_lines(cell, limits),
        _paddle_lines(cell),
        _log_lines(cell, arm, start),
        _survey_lines(cell),
        _ball_lines(cell),
        _rally_lines(cell),
        _trial_lines(cell),
        _accept_lines(cell),
        _gap_lines(cell, limits),
        [f"Note       {note}" for note in once(cell.notes, arm.names)],
    ]
    return "\n\n".join("\n".join(map(_wrapped, lines)) for lines in blocks if lines) + "\n"


def _wrapped(line: str) -> str:
    """A line in as many as it takes, under its own column."""
    return textwrap.fill(line, WIDTH, subsequent_indent=" " * COLUMN, break_long_words=False)


def _arm_lines(cell: Cell, arm: Arm) -> list[str]:
    spec = cell.arm
    moving, last = arm.masses()
    gravity = spec.base.rotation.T @ np.array(spec.gravity_m_s2)
    held = ", ".join(f"{j.name} = {j.value:g}" for j in spec.held)
    return [
        f"Arm        {spec.urdf_path}",
        f"Chain      {arm.n} joints to {spec.tip}: " + ", ".join(f"{j.name} ({j.kind})" for j in spec.joints),
        *([f"Held       off the chain: {held}"] if held else []),
        f"Base       at {_vector(spec.base.xyz_m)} m in the world, roll pitch yaw "
        f"{_vector(np.degrees(spec.base.rpy_rad))}°",
        f"Gravity    {_vector(gravity)} m/s² in the base's axes",
        f"Mass       {moving:.2f} kg moves, {last:.2f} kg of it behind the last joint, paddle included",
        f"Control    every {1000 * cell.period_s:g} ms, solver {cell.solver.name}, else {cell.solver.fallback}",
    ]


def _start_lines(cell: Cell, arm: Arm, start: Array | None) -> list[str]:
    if start is None and cell.follow is None:
        return ["Start      none given; a log would need one"]
    if start is None:
        return ["Start      a posture for the log's first pose, by inverse kinematics"]
    position, rotation = arm.pose(start)
    values = np.linalg.svd(arm.jacobian(start)[2][:3], compute_uv=False)
    lines = [
        "Start      " + ", ".join(f"{name} = {x:.4f}" for name, x in zip(arm.names, start, strict=True)),
        f"           strike point at {_vector(position)} m, face normal {_vector(rotation[:, 2])} in the world",
        f"           smallest gain from joint speeds to the strike point's velocity: {values.min():.3f} m",
        "Static     torque that holds the start posture:",
    ]
    load = arm.static_torque(start)
    for joint, torque in zip(cell.arm.joints, load, strict=True):
        bound = joint.limits.torque
        unit = "N" if joint.sliding else "N·m"
        share = "limit unknown"
        if bound is not None:
            limit = bound.hi if torque >= 0 else -bound.lo
            share = f"{100 * abs(torque) / limit:.0f} % of the limit" if limit > 0 else "no limit to speak of"
        lines.append(f"           {joint.name}: {torque:.2f} {unit}, {share}")
    return lines


def _limit_lines(cell: Cell, limits: dict[str, Limit]) -> list[str]:
    lines = ["Limits     stated, in brackets what a plan keeps to, and where it was stated:"]
    for name, limit in limits.items():
        for i, joint in enumerate(limit.joints):
            label = f"{name} of {joint}" if joint else name
            if not limit.known[i]:
                lines.append(f"           {label}: unknown")
                continue
            unit = limit.joint_units[i]
            stated = _interval(Bound(limit.lo[i], limit.hi[i], ""))
            kept = _interval(Bound(limit.kept_lo[i], limit.kept_hi[i], ""))
            shown = f"{stated} {unit}" + (f" [{kept}]" if kept != stated else "")
            lines.append(f"           {label}: {shown}, {limit.sources[i]}")
    return lines


def _paddle_lines(cell: Cell) -> list[str]:
    paddle, body = cell.paddle, paddle_mass(cell.paddle)
    inertia = body.inertia_kg_m2
    lines = [
        f"Paddle     {paddle.shape}, {body.mass_kg:.3f} kg with {len(paddle.parts)} further parts, "
        f"centre at {_vector(body.com_m)} m in the face frame",
        f"           inertia about it: xx {inertia[0, 0]:.3g}, yy {inertia[1, 1]:.3g}, zz {inertia[2, 2]:.3g} kg·m²",
        f"           strike point at {_vector(paddle.mount.xyz_m)} m, roll pitch yaw "
        f"{_vector(np.degrees(paddle.mount.rpy_rad))}° on {cell.arm.tip}",
    ]
    if cell.ball is not None:
        drag = f"drag coefficient {cell.ball.drag_coefficient:g}" if cell.ball.drag_coefficient else "no drag"
        lines.append(
            f"Ball       {1000 * cell.ball.mass_kg:g} g, radius {1000 * cell.ball.radius_m:g} mm, "
            f"{drag}, {cell.ball.source}"
        )
    if cell.contact is not None:
        lines.append(
            f"Contact    restitution {cell.contact.restitution:g}, friction {cell.contact.friction:g}, "
            f"{cell.contact.source}"
        )
    if cell.drive is not None:
        drive = cell.drive
        lines.append(
            f"Drive      delay {1000 * drive.delay_s:g} ms, lag {1000 * drive.lag_s:g} ms, "
            f"jitter ±{1000 * drive.jitter_s:g} ms"
        )
    return lines


def _log_lines(cell: Cell, arm: Arm, start: Array | None) -> list[str]:
    follow = cell.follow
    if follow is None:
        return ["Commands   none: the cell has no [follow] table"]
    lines = [
        f"Commands   {follow.commands.source}: {stamp_statistics(follow.commands.t_s)}",
        f"Reading    {reading_in_words(follow)}; falling short: {follow.shortfall}",
    ]
    reference = None if start is None else build_reference(cell, follow, *arm.pose(start))
    found = contacts(follow, reference)
    origin = "marked" if found.marked else "guessed from peaks"
    times = ", ".join(f"{t:.3f}" for t in found.t_s[:12]) + (", …" if len(found.t_s) > 12 else "")
    lines.append(
        f"Strikes    {len(found.t_s)} {origin}" + (f", at {times} s" if times else ": judged throughout")
    )
    if reference is not None and (odd := aslant(found, reference)):
        lines.append(f"           {odd}")
    if better := better_reading(cell):
        lines.append(f"           {better}")
    lines += [f"           mended: {mend}" for mend in follow.commands.mends]
    return lines


def _survey_lines(cell: Cell) -> list[str]:
    survey = cell.survey
    if survey is None:
        return []
    if survey.box_m is None:
        where = f"{survey.size} listed strikes"
    else:
        counts = " × ".join(map(str, survey.counts))
        low, high = map(_vector, survey.box_m)
        where = (
            f"{counts} points from {low} to {high} m, {len(survey.normals)} faces each: {survey.size} strikes"
        )
    speeds = [f"{speed:.4g}" for speed in (survey.speeds_m_s.min(), survey.speeds_m_s.max())]
    run_up = "joint travel alone" if survey.run_up_m is None else f"{survey.run_up_m:g} m before and after"
    return [
        f"Survey     {where}",
        f"           {' to '.join(dict.fromkeys(speeds))} m/s along the normal for {100 * survey.required_share:g} % "
        f"of the strikes; paddle {survey.rotation} at the strike; run-up: {run_up}",
    ]


def _ball_lines(cell: Cell) -> list[str]:
    ball, contact = cell.ball, cell.contact
    lines = []
    if ball is not None:
        air = [
            f"{name} {value:g}"
            for name, value in (("drag", ball.drag_coefficient), ("lift", ball.lift_coefficient))
            if value
        ]
        lines.append(
            f"Ball       {1000 * ball.mass_kg:.4g} g, radius {1000 * ball.radius_m:.4g} mm "
            f"({ball.source}); {', '.join(air) if air else 'flies without drag and lift'}"
        )
    if contact is not None:
        e = f"{contact.restitution:g}"
        if contact.restitution_at:
            e = f"by a table of {len(contact.restitution_at)} speeds"
        spread = f" ± {contact.restitution_spread:g}" if contact.restitution_spread else ""
        gives = "the arm's effective mass counts" if contact.arm_gives else "the paddle does not give"
        lines.append(
            f"Contact    restitution {e}{spread}, friction {contact.friction:g}, tangential restitution "
            f"{contact.tangential_restitution:g} ({contact.source}); {gives}"
        )
    return lines


def _rally_lines(cell: Cell) -> list[str]:
    rally = cell.rally
    if rally is None:
        return []
    apexes, offsets = (", ".join(f"{1000 * x:.4g}" for x in row) for row in (rally.apexes_m, rally.offsets_m))
    bearings = ", ".join(f"{x:.4g}" for x in np.degrees(rally.bearings_rad))
    lateral = f", coming in at {rally.lateral_m_s:g} m/s outward" if rally.lateral_m_s else ""
    grid = "" if rally.centres_box_m is None else f"; a grid of centres every {rally.centres_spacing_m:g} m"
    return [
        f"Rally      ball's centre at contact {_vector(rally.centre_m)} m; apexes {apexes} mm above it, offsets "
        f"{offsets} mm toward {bearings}°{lateral}",
        f"           back at the centre within {rally.recover_within_bounces} "
        f"bounce{'s' if rally.recover_within_bounces > 1 else ''}, seen after {1000 * rally.latency_s:g} ms; "
        f"{100 * rally.required_share:g} % of the points required{grid}",
    ]


def _trial_lines(cell: Cell) -> list[str]:
    trial = cell.trial
    if trial is None:
        return []
    sensor, asked = trial.sensor, trial.recovered
    law = (
        trial.law
        if trial.law_file is None
        else f"{trial.law} of {trial.law_file}, run only with --allow-code"
    )
    seen = f"{sensor.rate_hz:g} Hz" if sensor.rate_hz else "every control period"
    return [
        f"Trial      law {law}; apex {1000 * trial.apex_m:.4g} mm, {trial.bounces} bounces; ball seen at {seen}, "
        f"{1000 * sensor.latency_s:g} ms late",
        f"           recovered: within {1000 * asked.within_m:.4g} mm and {1000 * asked.apex_error_m:.4g} mm of apex "
        f"from bounce {asked.by_bounce} on for {asked.then_for}, and kept up; {100 * trial.required_share:g} % of the "
        "starts required",
    ]


def _accept_lines(cell: Cell) -> list[str]:
    accept = cell.accept
    return [
        f"Accepted   at {accept.at}: speed along the normal within {100 * accept.strike_speed_error_share:g} %, "
        f"{accept.strike_lateral_m_s:g} m/s sideways, {1000 * accept.strike_position_m:g} mm, "
        f"{np.degrees(accept.strike_tilt_error_rad):g}° of tilt,",
        f"           over {1000 * accept.strike_window_s:g} ms around each strike, "
        f"{100 * accept.strikes_share:g} % of the strikes; must be known: {', '.join(accept.require)}",
    ]


def _gap_lines(cell: Cell, limits: dict[str, Limit]) -> list[str]:
    unknown = [name for name in cell.accept.require if not limits[name].known.all()]
    lines = [f"Unchecked  {', '.join(not_checked(cell, limits))}"]
    if unknown:
        lines.append(
            f"           undecided at best, since these must be known and are not: {', '.join(unknown)}"
        )
    return lines


def _interval(bound: Bound) -> str:
    if np.isinf(bound.lo) and np.isinf(bound.hi):
        return "no limit"
    if bound.lo == -bound.hi:
        return f"±{bound.hi:.4g}"
    return f"{bound.lo:.4g} … {bound.hi:.4g}"


def _vector(values: object) -> str:
    return "(" + ", ".join(f"{x + 0.0:.4g}" for x in np.round(np.asarray(values, dtype=float), 6)) + ")"
