"""Monitoring on the effect scale: what each look estimated, with the ordinary and the adjusted interval."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from treering.report.figures import style
from treering.report.numbers import effect, interval, plural
from treering.report.wording import directions, measure_words
from treering.terms import CROSSED, Better, Verdict

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Body = Mapping[str, Any]
HEIGHT = 4.2


def effect_figure(body: Body, intervention: str, name: str) -> str:
    """Draw the estimate over the looks with ordinary and boundary-adjusted intervals.

    Parameters
    ----------
    body : mapping
        Analysis body of a monitored outcome.
    intervention : str
        For the words at the ends of the axis.
    name : str
        Name of the figure.

    Returns
    -------
    str
        SVG.
    """
    looks = [look for look in body["monitoring"]["looks"] if look.get("estimate") is not None]
    with style.settings():
        figure = style.new_figure(HEIGHT)
        axes = figure.add_axes((0.075, 0.21, 0.905, 0.63))
        low, high = _range(body, looks)
        axes.set_ylim(low, high)
        axes.set_xlim(0.4, len(looks) + 0.6)
        _scale(axes, body, looks, intervention, low, high)
        for x, look in enumerate(looks, start=1):
            _look(axes, x, look, low, high)
        _key(axes)
        title = f"Monitoring on the effect scale: {body['title']}"
        return style.to_svg(figure, name, title, describe(body, looks))


def describe(body: Body, looks: Sequence[Body]) -> str:
    """Say in words what the figure shows."""
    if not looks:
        return "No look has an estimate yet."
    last = looks[-1]
    scale, measure = body["scale"], body["measure"]
    shown = effect(last["estimate"], scale, measure)
    ordinary = interval(last["ci_low"], last["ci_high"], scale, measure)
    adjusted = interval(last["adjusted_low"], last["adjusted_high"], scale, measure)
    return (
        f"{plural(len(looks), 'look')}. Last: {measure_words(measure)} {shown}, ordinary interval "
        f"{ordinary}, boundary-adjusted interval {adjusted}; verdict: {last['verdict']}."
    )


def _range(body: Body, looks: Sequence[Body]) -> tuple[float, float]:
    """Cover the ordinary intervals; much wider adjusted ones leave the picture by an arrow."""
    inner = [0.0, 1.25 * abs(body["mid"]), -1.25 * abs(body["mid"])]
    inner += [look[k] for look in looks for k in ("estimate", "ci_low", "ci_high") if look.get(k) is not None]
    span = max(inner) - min(inner)
    outer = [look[k] for look in looks for k in ("adjusted_low", "adjusted_high") if look.get(k) is not None]
    low = max(min([*inner, *outer]), min(inner) - 0.45 * span)
    high = min(max([*inner, *outer]), max(inner) + 0.45 * span)
    return low - 0.05 * span, high + 0.05 * span


def _scale(axes: Axes, body: Body, looks: Sequence[Body], intervention: str, low: float, high: float) -> None:
    style.bare(axes, "left")
    marks = style.ticks(low, high, body["scale"])
    axes.set_yticks([y for y, _ in marks], [label for _, label in marks])
    step = max(1, -(-len(looks) // 9))
    shown = [x for x in range(1, len(looks) + 1) if (len(looks) - x) % step == 0]
    axes.set_xticks(shown, [f"look {looks[x - 1]['number']}\n{looks[x - 1]['date']}" for x in shown])
    axes.tick_params(axis="both", length=3, color=style.FAINT)
    axes.axhspan(-abs(body["mid"]), abs(body["mid"]), color=style.WASH, lw=0, zorder=0)
    axes.axhline(0.0, color=style.INK, lw=0.9, zorder=1)
    below, above = directions(body["measure"], intervention)
    good = body["better"] == Better.LOWER
    name = measure_words(body["measure"])
    unit = f" ({body['unit']})" if body.get("unit") else ""
    ends = (
        f"\u2191 {above}, {'worse' if good else 'better'}",
        f"\u2193 {below}, {'better' if good else 'worse'}",
    )
    style.end_words(axes, f"{name[0].upper()}{name[1:]}{unit}", *ends, below=-0.24)


def _look(axes: Axes, x: float, look: Body, low: float, high: float) -> None:
    _adjusted(axes, x, look, low, high)
    if look.get("ci_low") is not None and look.get("ci_high") is not None:
        axes.plot(
            [x, x],
            [max(look["ci_low"], low), min(look["ci_high"], high)],
            color=style.ACCENT,
            lw=4.5,
            zorder=3,
        )
    marker, filled = verdict_marker(look["verdict"])
    axes.plot(
        [x],
        [look["estimate"]],
        marker,
        ms=9 if filled else 8,
        mfc=style.INK if filled else style.PAPER,
        mec=style.INK,
        mew=1.3,
        zorder=5,
    )


def _adjusted(axes: Axes, x: float, look: Body, low: float, high: float) -> None:
    ends = look.get("adjusted_low"), look.get("adjusted_high")
    if ends == (None, None):
        return
    bottom = low if ends[0] is None else max(ends[0], low)
    top = high if ends[1] is None else min(ends[1], high)
    axes.plot([x, x], [bottom, top], color=style.INK, lw=1.1, zorder=2)
    for end, y, limit, arrow in ((ends[0], bottom, low, "v"), (ends[1], top, high, "^")):
        inside = end is not None and low <= end <= high
        if inside:
            axes.plot([x - 0.07, x + 0.07], [y, y], color=style.INK, lw=1.1, zorder=2)
        else:
            axes.plot([x], [limit], arrow, ms=5, color=style.INK, clip_on=False, zorder=2)


def verdict_marker(verdict: str) -> tuple[str, bool]:
    """Return the marker of a verdict and whether it is filled: told by shape, not by colour."""
    if verdict in CROSSED:
        return "D", True
    if verdict == Verdict.NO_LONGER_SUPPORTED:
        return "X", False
    if verdict == Verdict.REACHED_WITHOUT_CROSSING:
        return "s", False
    return "o", False


def _key(axes: Axes) -> None:
    from matplotlib.lines import Line2D

    point: Any = {"ls": "none", "mec": style.INK, "mew": 1.3}
    handles = [
        Line2D([], [], color=style.ACCENT, lw=4.5, label="ordinary interval"),
        Line2D([], [], color=style.INK, lw=1.1, label="boundary-adjusted interval"),
        Line2D([], [], marker="o", mfc=style.PAPER, ms=6, label="estimate", **point),
        Line2D([], [], marker="D", mfc=style.INK, ms=6, label="crossed", **point),
        Line2D([], [], marker="X", mfc=style.PAPER, ms=7, label="no longer supported", **point),
    ]
    axes.legend(
        handles=handles,
        loc="lower right",
        bbox_to_anchor=(1.0, 1.07),
        ncols=len(handles),
        frameon=False,
        fontsize=8,
        handlelength=1.4,
        columnspacing=1.4,
        borderaxespad=0.2,
    )
