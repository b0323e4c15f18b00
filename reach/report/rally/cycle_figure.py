"""The drawing of one demonstrated cycle: the arm from the side, and heights over time."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.evidence.rallies import Shown
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, colormaps, name_all, svg_of
from reach.report.looks import ARM_SHADES, BALL_STYLE, CONTACT_STYLE, INK, PADDLE_STYLE
from reach.report.rally.captions import of_cycle
from reach.result import RallyResult

POSTURES = 6
SHADES = (0.25, 0.9)  # of the first and last posture, in the map of greys
HALF_FACE_M = 0.08  # drawn where the paddle gives no size
UPRIGHT_M = 1e-6  # a strike point nearer to the base's axis than this has no plane with it


def draw_cycle(result: RallyResult) -> Picture | None:
    """Draw the cycle shown; None where there is none."""
    shown = result.evidence.shown
    if shown is None or len(shown.t_s) == 0:
        return None
    figure = Figure(figsize=(WIDTH_IN, 4.8))
    side, height = figure.subplots(1, 2, width_ratios=[1.15, 1])
    _side(side, shown, _half_face(result))
    _heights(height, shown)
    name_all(figure, [side, height], 5)
    return Picture(of_cycle(shown), svg_of(figure))


def _half_face(result: RallyResult) -> float:
    paddle = result.cell.paddle
    if paddle.radius_m is not None:
        return paddle.radius_m
    return HALF_FACE_M if paddle.size_m is None else paddle.size_m[0] / 2


def _across(shown: Shown) -> Array:
    """Return the horizontal direction (3,) from the base to the strike point."""
    out = np.array(shown.outline[0, -1] - shown.outline[0, 0])
    out[2] = 0.0
    size = float(np.linalg.norm(out))
    if size > UPRIGHT_M:
        return np.asarray(out / size)
    return np.array([np.cos(shown.bearing_rad), np.sin(shown.bearing_rad), 0.0])


def _side(axes: Axes, shown: Shown, half_face_m: float) -> None:
    along, base = _across(shown), shown.outline[0, 0]

    def flat(places: Array) -> Array:
        return np.stack([(places - base) @ along, places[..., 2]], axis=-1)

    rows = np.unique(np.round(np.linspace(0, len(shown.t_s) - 1, POSTURES)).astype(int))
    shades = np.linspace(*SHADES, len(rows))
    for place, (row, shade) in enumerate(zip(rows.tolist(), shades.tolist(), strict=True)):
        colour = colormaps[ARM_SHADES](shade)
        links = flat(shown.outline[row])
        label = {0: "arm, first", len(rows) - 1: "arm, last"}.get(place, "_")
        axes.plot(
            *links.T, color=colour, linewidth=2, marker="o", markersize=3.5, label=label, zorder=3 + place
        )
        level = np.array([shown.normal[row, 2], -shown.normal[row] @ along])  # along the face, in the view
        face = links[-1] + half_face_m * np.outer([-1, 1], level)
        axes.plot(*face.T, color=colour, linewidth=3.2, solid_capstyle="butt", zorder=3 + place)
    axes.plot(*flat(shown.ball).T, **BALL_STYLE, zorder=12)
    contacts = _at(shown, np.array(shown.contact_s), shown.ball)
    axes.plot(*flat(contacts).T, **{**CONTACT_STYLE, "zorder": 13})
    axes.set(xlabel="from the base toward the strike point, m", ylabel="z, m")
    axes.set_aspect("equal", adjustable="datalim")


def _heights(axes: Axes, shown: Shown) -> None:
    t = 1000 * (shown.t_s - shown.t_s[0])
    axes.plot(t, 1000 * shown.ball[:, 2], **BALL_STYLE)
    axes.plot(t, 1000 * shown.outline[:, -1, 2], **PADDLE_STYLE)
    times = np.array(shown.contact_s)
    for at in times.tolist():
        axes.axvline(1000 * (at - shown.t_s[0]), color=INK, linewidth=0.7, linestyle=(0, (2, 3)))
    axes.plot(
        1000 * (times - shown.t_s[0]),
        1000 * _at(shown, times, shown.ball)[:, 2],
        **CONTACT_STYLE,
        clip_on=False,
    )
    axes.set(xlabel="time, ms", ylabel="height z, mm")


def _at(shown: Shown, times: Array, values: Array) -> Array:
    """Return values (f, 3) of the cycle's instants at some times (k,): (k, 3)."""
    return np.column_stack([np.interp(times, shown.t_s, values[:, k]) for k in range(3)])
