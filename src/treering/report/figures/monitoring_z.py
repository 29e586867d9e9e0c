"""Monitoring on the Z scale: the looks as they happened, the bounds as used, and the curve in hindsight."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from treering.report.figures import style
from treering.report.figures.monitoring_effect import marker_of
from treering.report.numbers import number, percent, plural
from treering.terms import CROSSED, Better, OutcomeRole

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Body = Mapping[str, Any]
HEIGHT = 4.3
TALLEST = 6.0


def z_figure(body: Body, name: str) -> str:
    """Draw Z against the information fraction.

    Parameters
    ----------
    body : mapping
        Analysis body of a monitored outcome.
    name : str
        Name of the figure.

    Returns
    -------
    str
        SVG.
    """
    monitoring = body["monitoring"]
    looks = [look for look in monitoring["looks"] if look.get("z") is not None]
    hindsight = [step for step in monitoring.get("hindsight") or () if step.get("z") is not None]
    with style.settings():
        figure = style.new_figure(HEIGHT)
        axes = figure.add_axes((0.055, 0.14, 0.925, 0.69))
        right = max([1.0, *(s["fraction"] for s in [*looks, *hindsight])]) * 1.06
        tall = _tall(looks, hindsight)
        axes.set_xlim(0.0, right)
        axes.set_ylim(-tall, tall)
        _scale(axes, body, looks, right, tall)
        _hindsight(axes, hindsight, tall)
        _bounds(axes, looks, monitoring["plan"], body, tall)
        _path(axes, looks)
        _key(axes, looks, hindsight)
        return style.to_svg(figure, name, f"Monitoring on the Z scale: {body['title']}", describe(looks))


def describe(looks: Sequence[Body]) -> str:
    """Say in words what the figure shows."""
    if not looks:
        return "No look has a Z yet."
    last = looks[-1]
    bound = last["boundary"] if last.get("boundary") is not None else last.get("redrawn_boundary")
    return (
        f"{plural(len(looks), 'look')} as they happened. Last: Z {number(last['z'])} at "
        f"{percent(last['fraction'])} of the required information, boundary {number(bound)}; verdict: "
        f"{last['verdict']}."
    )


def _tall(looks: Sequence[Body], hindsight: Sequence[Body]) -> float:
    values = [abs(step["z"]) for step in [*looks, *hindsight]]
    bounds = [b for look in looks for k in ("boundary", "redrawn_boundary") if (b := look.get(k)) is not None]
    return float(min(1.15 * max([3.0, *values, *bounds]), max([TALLEST, *(1.15 * v for v in values)])))


def _scale(axes: Axes, body: Body, looks: Sequence[Body], right: float, tall: float) -> None:
    style.bare(axes, "left")
    marks = style.ticks(-tall, tall, "plain", most=8)
    axes.set_yticks([y for y, _ in marks], [label for _, label in marks])
    across = style.ticks(0.0, right, "plain", most=8)
    axes.set_xticks([x for x, _ in across], [f"{100 * x:.0f}%" for x, _ in across])
    axes.tick_params(axis="both", length=3, color=style.FAINT)
    axes.axhline(0.0, color=style.INK, lw=0.9, zorder=1)
    axes.axvline(1.0, color=style.MUTED, lw=0.9, ls=(0, (5, 3)), zorder=1)
    # The words stand on the side of the line that the looks have left free.
    free = 0.97 * tall if not looks or looks[-1]["z"] < 0 else -0.97 * tall
    where: Any = {"ha": "right", "va": "top" if free > 0 else "bottom"}
    axes.text(1.0, free, "required information ", fontsize=8.5, color=style.MUTED, **where)
    axes.set_xlabel("share of the required information", fontsize=8.5)
    up, down = ("benefit", "harm") if body["better"] == Better.HIGHER else ("harm", "benefit")
    style.end_words(axes, "Z", f"\u2191 towards {up}", f"\u2193 towards {down}", below=-0.13)


def _hindsight(axes: Axes, steps: Sequence[Body], tall: float) -> None:
    if not steps:
        return
    x = [step["fraction"] for step in steps]
    y = [max(min(step["z"], tall), -tall) for step in steps]
    axes.plot(x, y, color=style.MUTED, lw=1.1, ls=(0, (1, 1.8)), marker=".", ms=4, zorder=2)


def _signs(plan: Body, body: Body) -> tuple[int, ...]:
    """Return the sides that can cross: both, or the tested one."""
    if plan.get("sides", 2) == 2:
        return (1, -1)
    good = 1 if body["better"] == Better.HIGHER else -1
    return (good if body["role"] == OutcomeRole.BENEFIT else -good,)


def _bounds(axes: Axes, looks: Sequence[Body], plan: Body, body: Body, tall: float) -> None:
    used = [look for look in looks if look.get("spends") and look.get("boundary") is not None]
    redrawn = [look for look in looks if not look.get("spends") and look.get("redrawn_boundary") is not None]
    futile = [look for look in looks if look.get("futility") is not None]
    dashed: Any = {"color": style.INK, "lw": 1.4, "ls": (0, (6, 2)), "zorder": 3}
    for sign in _signs(plan, body):
        # An amendment opens a new ledger: its bounds are not a continuation of the old ones.
        for ledger in dict.fromkeys(look.get("plan_digest") for look in used):
            part = [look for look in used if look.get("plan_digest") == ledger]
            axes.plot([k["fraction"] for k in part], [sign * k["boundary"] for k in part], **dashed)
        inside = [look for look in used if look["boundary"] <= tall]
        _bars(axes, [(k["fraction"], sign * k["boundary"]) for k in inside], style.INK, 2.0)
        _bars(axes, [(k["fraction"], sign * k["redrawn_boundary"]) for k in redrawn], style.MUTED, 1.2)
        line = [(k["fraction"], sign * k["futility"]) for k in futile]
        axes.plot([x for x, _ in line], [y for _, y in line], color=style.MUTED, lw=1.1, ls=(0, (3, 2, 1, 2)))


def _bars(axes: Axes, places: Sequence[tuple[float, float]], colour: str, weight: float) -> None:
    x, y = [place[0] for place in places], [place[1] for place in places]
    axes.plot(x, y, "_", ms=13, mew=weight, color=colour, zorder=3)


def _path(axes: Axes, looks: Sequence[Body]) -> None:
    axes.plot([k["fraction"] for k in looks], [k["z"] for k in looks], color=style.ACCENT, lw=1.8, zorder=4)
    size = 8.0 if len(looks) < 14 else 6.0
    for look in looks:
        marker = marker_of(look["verdict"], style.ACCENT, size)
        axes.plot([look["fraction"]], [look["z"]], zorder=5, **marker)
    for numbers, x, z, outside in _numbered(axes, looks):
        axes.annotate(
            ", ".join(numbers),
            (x, z),
            xytext=(0, 8 if (z >= 0) == outside else -15),
            textcoords="offset points",
            ha="center",
            fontsize=8,
            color=style.INK,
            zorder=6,
        )


def _numbered(axes: Axes, looks: Sequence[Body]) -> list[tuple[list[str], float, float, bool]]:
    """Gather looks too close to be numbered apart, with their place and whether they crossed.

    A crossing is numbered on the side away from no effect and any other look on the near side, so that the
    boundary, which lies between, covers neither.
    """
    width = axes.get_xlim()[1] - axes.get_xlim()[0]
    height = axes.get_ylim()[1] - axes.get_ylim()[0]
    groups: list[tuple[list[str], float, float, bool]] = []
    for look in looks:
        x, z, crossed = look["fraction"], look["z"], look["verdict"] in CROSSED
        for i, (numbers, at, level, outside) in enumerate(groups):
            room = (0.025 + 0.011 * len(numbers)) * width
            near = abs(at - x) < room and abs(level - z) < 0.09 * height and len(numbers) < 4
            if near and outside == crossed:
                groups[i] = ([*numbers, str(look["number"])], at, level, outside)
                break
        else:
            groups.append(([str(look["number"])], x, z, crossed))
    return groups


def _key(axes: Axes, looks: Sequence[Body], hindsight: Sequence[Body]) -> None:
    from matplotlib.lines import Line2D

    path: Any = {"color": style.ACCENT, "lw": 1.8, "marker": "o", "mfc": style.PAPER}
    handles = [
        Line2D([], [], label="looks as they happened", **path),
        Line2D([], [], color=style.INK, lw=1.4, ls=(0, (6, 2)), label="boundary as used"),
    ]
    if any(not k.get("spends") and k.get("redrawn_boundary") is not None for k in looks):
        bar: Any = {"color": style.MUTED, "ls": "none", "marker": "_", "ms": 11}
        handles.append(Line2D([], [], label="redrawn, no alpha spent", **bar))
    if any(look.get("futility") is not None for look in looks):
        handles.append(Line2D([], [], color=style.MUTED, lw=1.1, ls=(0, (3, 2, 1, 2)), label="futility"))
    if hindsight:
        dots: Any = {"color": style.MUTED, "lw": 1.1, "ls": (0, (1, 1.8)), "marker": "."}
        handles.append(Line2D([], [], label="hindsight, by publication date", **dots))
    style.key(axes, handles, lift=1.06)
