"""Monitoring on the Z scale: the looks as they happened, the bounds as used, and the curve in hindsight."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from treering.report.figures import style
from treering.report.figures.monitoring_effect import verdict_marker
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
        _path(axes, looks, tall)
        _key(axes)
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
    for sign in _signs(plan, body):
        x = [look["fraction"] for look in used]
        axes.plot(
            x, [sign * look["boundary"] for look in used], color=style.INK, lw=1.4, ls=(0, (6, 2)), zorder=3
        )
        for look in used:
            y = sign * look["boundary"]
            if abs(y) <= tall:
                axes.plot([look["fraction"]], [y], "_", ms=13, mew=2, color=style.INK, zorder=3)
        for look in redrawn:
            axes.plot(
                [look["fraction"]], [sign * look["redrawn_boundary"]], "_", ms=13, mew=1.2, color=style.MUTED
            )


def _path(axes: Axes, looks: Sequence[Body], tall: float) -> None:
    axes.plot([k["fraction"] for k in looks], [k["z"] for k in looks], color=style.ACCENT, lw=1.8, zorder=4)
    for look in looks:
        marker, filled = verdict_marker(look["verdict"])
        axes.plot(
            [look["fraction"]],
            [look["z"]],
            marker,
            ms=8,
            mfc=style.ACCENT if filled else style.PAPER,
            mec=style.ACCENT,
            mew=1.5,
            zorder=5,
        )
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
            near = abs(at - x) < 0.035 * width and abs(level - z) < 0.09 * height
            if near and outside == crossed:
                groups[i] = ([*numbers, str(look["number"])], at, level, outside)
                break
        else:
            groups.append(([str(look["number"])], x, z, crossed))
    return groups


def _key(axes: Axes) -> None:
    from matplotlib.lines import Line2D

    handles = [
        Line2D(
            [], [], color=style.ACCENT, lw=1.8, marker="o", mfc=style.PAPER, label="looks as they happened"
        ),
        Line2D([], [], color=style.INK, lw=1.4, ls=(0, (6, 2)), label="boundary as used"),
        Line2D([], [], color=style.MUTED, ls="none", marker="_", ms=11, label="redrawn, no alpha spent"),
        Line2D(
            [],
            [],
            color=style.MUTED,
            lw=1.1,
            ls=(0, (1, 1.8)),
            marker=".",
            label="hindsight, by publication date",
        ),
    ]
    axes.legend(
        handles=handles,
        loc="lower right",
        bbox_to_anchor=(1.0, 1.06),
        ncols=len(handles),
        frameon=False,
        fontsize=8,
        handlelength=2.2,
        columnspacing=1.4,
        borderaxespad=0.2,
    )
