"""Monitoring on the effect scale: what each look estimated, with the ordinary and the adjusted interval."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from treering.report.figures import style
from treering.report.numbers import effect, interval, plural
from treering.report.wording import directions, measure_words
from treering.terms import Better, Verdict

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
        axes = figure.add_axes((0.075, 0.21, 0.885, 0.63))
        low, high = _range(body, looks)
        axes.set_ylim(low, high)
        axes.set_xlim(0.4, len(looks) + 0.6)
        _scale(axes, body, looks, intervention, low, high)
        for x, look in enumerate(looks, start=1):
            _look(axes, x, look, low, high, 1.0 if len(looks) < 14 else 0.65)
        _key(axes, looks)
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
    """Cover every estimate and what a typical ordinary interval needs; what is wider leaves by an arrow."""
    points = [0.0, 1.25 * abs(body["mid"]), -1.25 * abs(body["mid"]), *(k["estimate"] for k in looks)]
    known = [k for k in looks if k.get("ci_low") is not None and k.get("ci_high") is not None]
    points += [known[-1][name] for name in ("ci_low", "ci_high") if known]
    widths = sorted(k["ci_high"] - k["ci_low"] for k in known)
    reach = max([max(points) - min(points), *widths[len(widths) // 2 : len(widths) // 2 + 1]])
    names = ("ci_low", "ci_high", "adjusted_low", "adjusted_high")
    ends = [k[name] for k in looks for name in names if k.get(name) is not None]
    low = max(min([*points, *ends]), min(points) - 0.5 * reach)
    high = min(max([*points, *ends]), max(points) + 0.5 * reach)
    return low - 0.05 * reach, high + 0.05 * reach


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


def _look(axes: Axes, x: float, look: Body, low: float, high: float, size: float) -> None:
    _adjusted(axes, x, look, low, high)
    if look.get("ci_low") is not None and look.get("ci_high") is not None:
        ends = [max(look["ci_low"], low), min(look["ci_high"], high)]
        axes.plot([x, x], ends, color=style.ACCENT, lw=4.5 * size, zorder=3)
    axes.plot([x], [look["estimate"]], zorder=5, **marker_of(look["verdict"], style.INK, 8.5 * size))


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


#: Marker of each state, whether it is filled, and its word: told by shape before colour.
_MARKERS: dict[str, tuple[str, bool, str]] = {
    Verdict.BENEFIT_CROSSED: ("D", True, "crossed"),
    Verdict.HARM_CROSSED: ("D", True, "crossed"),
    Verdict.FUTILITY_CROSSED: ("s", True, "futility crossed"),
    Verdict.NO_LONGER_SUPPORTED: ("X", False, "no longer supported"),
    Verdict.REACHED_WITHOUT_CROSSING: ("s", False, "information reached"),
}
_OTHER = ("o", False, "estimate")


def verdict_marker(verdict: str) -> tuple[str, bool, str]:
    """Return the marker of a verdict, whether it is filled, and its word."""
    return _MARKERS.get(verdict, _OTHER)


def marker_of(verdict: str, colour: str, size: float) -> dict[str, Any]:
    """Return the drawing options of a verdict's marker."""
    marker, filled, _ = verdict_marker(verdict)
    face = colour if filled else style.PAPER
    return {"marker": marker, "ls": "none", "ms": size, "mfc": face, "mec": colour, "mew": 1.3}


def _key(axes: Axes, looks: Sequence[Body]) -> None:
    from matplotlib.lines import Line2D

    handles = [
        Line2D([], [], color=style.ACCENT, lw=4.5, label="ordinary interval"),
        Line2D([], [], color=style.INK, lw=1.1, label="boundary-adjusted interval"),
    ]
    words = {verdict_marker(look["verdict"])[2]: look["verdict"] for look in looks}
    handles += [
        Line2D([], [], label=word, **marker_of(verdict, style.INK, 6)) for word, verdict in words.items()
    ]
    style.key(axes, handles, lift=1.07)
