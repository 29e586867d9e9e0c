"""Forest figure: points with interval lines, the pooled diamond with the last version's ghosted above it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from treering.report.figures import style
from treering.report.numbers import effect, interval, percent, plural
from treering.report.wording import directions, measure_words, no_effect
from treering.terms import Better

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Body = Mapping[str, Any]
ROW = 0.27
LEFT, RIGHT = 0.275, 0.595
WEIGHT, BIAS = 0.865, 0.885


@dataclass(frozen=True)
class Frame:
    """Range and words of the effect axis."""

    low: float
    high: float
    scale: str
    measure: str


def forest_figure(
    body: Body, previous: Body | None, marks: Mapping[str, str], intervention: str, name: str
) -> str:
    """Draw the trials and the pooled effect of one synthesis.

    Parameters
    ----------
    body : mapping
        Analysis body.
    previous : mapping or None
        Analysis body of the version before; its pooled diamond is ghosted.
    marks : mapping
        Word for the margin by trial: "new", "changed", "left".
    intervention : str
        For the words at the ends of the axis.
    name : str
        Name of the figure.

    Returns
    -------
    str
        SVG.
    """
    rows = [row for row in body["trials"] if row.get("estimate") is not None]
    ghost = (previous or {}).get("pooled") if (previous or {}).get("measure") == body["measure"] else None
    predicts = (body.get("pooled") or {}).get("prediction_low") is not None
    lines = len(rows) + 2.1 + (0.9 if ghost else 0) + (0.85 if predicts else 0)
    with style.settings():
        figure = style.new_figure(ROW * lines + 0.95)
        height = ROW * lines + 0.95
        axes = figure.add_axes((LEFT, 0.62 / height, RIGHT - LEFT, (height - 0.62 - 0.3) / height))
        frame = _frame(body, rows, ghost)
        axes.set_xlim(frame.low, frame.high)
        axes.set_ylim(lines - 0.4, -0.6)
        _heads(axes, body)
        _scale(axes, body, intervention, frame)
        for i, row in enumerate(rows):
            _trial(axes, i, row, marks.get(row["trial"], ""), frame)
        _pooled(axes, len(rows) + 0.6, body, ghost, frame)
        return style.to_svg(figure, name, f"Forest figure: {body['title']}", describe(body, rows))


def describe(body: Body, rows: Sequence[Body]) -> str:
    """Say in words what the figure shows."""
    pooled = body.get("pooled") or {}
    ends = interval(pooled.get("ci_low"), pooled.get("ci_high"), body["scale"], body["measure"])
    return (
        f"{plural(len(rows), 'trial')} with their {measure_words(body['measure'])} and interval. Pooled: "
        f"{effect(pooled.get('estimate'), body['scale'], body['measure'])} ({ends}). All numbers stand "
        "in the table below the figure."
    )


def _frame(body: Body, rows: Sequence[Body], ghost: Body | None) -> Frame:
    """Cover every point and what a typical trial interval needs; what is wider ends in an arrow."""
    points = [0.0, body["mid"], -body["mid"], *(row["estimate"] for row in rows)]
    widths = sorted(row["ci_high"] - row["ci_low"] for row in rows)
    reach = max(max(points) - min(points), widths[len(widths) // 2])
    ends = [row[k] for row in rows for k in ("ci_low", "ci_high")]
    for pooled in (body.get("pooled") or {}, ghost or {}):
        names = ("ci_low", "ci_high", "prediction_low", "prediction_high")
        ends += [end for name in names if (end := pooled.get(name)) is not None]
    low = max(min(points) - 0.8 * reach, min([*points, *ends]) - 0.05 * reach)
    high = min(max(points) + 0.8 * reach, max([*points, *ends]) + 0.05 * reach)
    return Frame(low, high, body["scale"], body["measure"])


def _heads(axes: Axes, body: Body) -> None:
    name = measure_words(body["measure"])
    unit = f", {body['unit']}" if body.get("unit") else ""
    for x, text, side in (
        (0.068, "Trial", "left"),
        (RIGHT + 0.015, f"{name[0].upper()}{name[1:]}{unit}", "left"),
        (WEIGHT, "Weight", "right"),
        (BIAS, "Risk of bias", "left"),
    ):
        _text(axes, x, -0.95, text, ha=side, color=style.MUTED, fontsize=8)


def _text(axes: Axes, x: float, y: float, text: str, **options: Any) -> None:
    """Write at a figure fraction across and a row down."""
    from matplotlib.transforms import blended_transform_factory

    place = blended_transform_factory(axes.figure.transFigure, axes.transData)
    axes.text(x, y, text, transform=place, va="center", clip_on=False, **options)


def _scale(axes: Axes, body: Body, intervention: str, frame: Frame) -> None:
    style.bare(axes, "bottom")
    marks = style.ticks(frame.low, frame.high, frame.scale)
    axes.set_xticks([x for x, _ in marks], [label for _, label in marks])
    axes.set_yticks([])
    axes.tick_params(axis="x", length=3, width=0.8, color=style.FAINT)
    axes.axvspan(-abs(body["mid"]), abs(body["mid"]), color=style.WASH, lw=0, zorder=0)
    axes.axvline(0.0, color=style.INK, lw=0.9, zorder=1)
    low, high = directions(body["measure"], intervention)
    good = body["better"] == Better.LOWER
    for x, text, side in (
        (0.0, f"\u2190 {low}, {'better' if good else 'worse'}", "right"),
        (0.0, f"{high}, {'worse' if good else 'better'} \u2192", "left"),
    ):
        axes.annotate(
            text,
            (x, 0),
            xycoords=("data", "axes fraction"),
            xytext=(-8 if side == "right" else 8, -31),
            textcoords="offset points",
            ha=side,
            fontsize=8.5,
            annotation_clip=False,
        )


def _trial(axes: Axes, y: float, row: Body, mark: str, frame: Frame) -> None:
    main = row["in_main"]
    colour = style.ACCENT if main else style.MUTED
    if mark:
        _text(axes, 0.0, y, mark, ha="left", fontsize=8, color=style.ACCENT, fontweight="bold")
    _text(
        axes, 0.068, y, style.at_most(row["label"], 29), ha="left", color=style.INK if main else style.MUTED
    )
    _line(
        axes, y, row["ci_low"], row["ci_high"], frame, color=colour, lw=1.3, ls="-" if main else (0, (2, 2))
    )
    axes.plot(
        [row["estimate"]], [y], "o", ms=5, mfc=colour if main else style.PAPER, mec=colour, mew=1.2, zorder=4
    )
    values = f"{effect(row['estimate'], frame.scale, frame.measure)} ({_ends(row, frame)})"
    _text(axes, RIGHT + 0.015, y, values, ha="left", color=style.INK if main else style.MUTED)
    weight = percent(row.get("weight"), 1) if main else "left out"
    _text(axes, WEIGHT, y, weight, ha="right", color=style.INK if main else style.MUTED)
    _text(axes, BIAS, y, row.get("risk_of_bias") or "not judged", ha="left", color=style.MUTED)


def _ends(row: Body, frame: Frame) -> str:
    return interval(row["ci_low"], row["ci_high"], frame.scale, frame.measure)


def _line(axes: Axes, y: float, low: float, high: float, frame: Frame, **options: Any) -> None:
    """Draw an interval; an end outside the axis becomes an arrow head."""
    left, right = max(low, frame.low), min(high, frame.high)
    axes.plot([left, right], [y, y], zorder=3, **options)
    for outside, x, marker in ((low < frame.low, left, "<"), (high > frame.high, right, ">")):
        if outside:
            axes.plot([x], [y], marker, ms=4.5, color=options["color"], clip_on=False, zorder=3)


def _pooled(axes: Axes, y: float, body: Body, ghost: Body | None, frame: Frame) -> None:
    axes.plot([0, 1], [y - 0.75] * 2, color=style.FAINT, lw=0.8, transform=_across(axes), clip_on=False)
    if ghost and ghost.get("estimate") is not None:
        _diamond(axes, y, ghost, frame, ghosted=True)
        _text(axes, 0.068, y, "Pooled, last version", ha="left", color=style.MUTED)
        values = f"{effect(ghost['estimate'], frame.scale, frame.measure)} ({_ends(ghost, frame)})"
        _text(axes, RIGHT + 0.015, y, values, ha="left", color=style.MUTED)
        y += 0.9
    pooled = body.get("pooled") or {}
    if pooled.get("estimate") is None:
        _text(axes, 0.068, y, "Pooled: not estimable", ha="left")
        return
    _diamond(axes, y, pooled, frame, ghosted=False)
    _text(axes, 0.068, y, f"Pooled, {plural(body['k'], 'trial')}", ha="left", fontweight="bold")
    values = f"{effect(pooled['estimate'], frame.scale, frame.measure)} ({_ends(pooled, frame)})"
    _text(axes, RIGHT + 0.015, y, values, ha="left", fontweight="bold")
    if pooled.get("prediction_low") is not None:
        _line(
            axes,
            y + 0.85,
            pooled["prediction_low"],
            pooled["prediction_high"],
            frame,
            color=style.INK,
            lw=2.2,
        )
        _text(axes, 0.068, y + 0.85, "Prediction, a new trial", ha="left", color=style.MUTED)
        ends = interval(pooled["prediction_low"], pooled["prediction_high"], frame.scale, frame.measure)
        _text(axes, RIGHT + 0.015, y + 0.85, ends, ha="left", color=style.MUTED)


def _across(axes: Axes) -> Any:
    from matplotlib.transforms import blended_transform_factory

    return blended_transform_factory(axes.figure.transFigure, axes.transData)


def _diamond(axes: Axes, y: float, pooled: Body, frame: Frame, *, ghosted: bool) -> None:
    from matplotlib.patches import Polygon

    if pooled.get("ci_low") is None or pooled.get("ci_high") is None:
        axes.plot(
            [pooled["estimate"]], [y], "d", ms=6, mfc="none" if ghosted else style.ACCENT, mec=style.ACCENT
        )
        return
    for outside, x, marker in (
        (pooled["ci_low"] < frame.low, frame.low, "<"),
        (pooled["ci_high"] > frame.high, frame.high, ">"),
    ):
        if outside:
            axes.plot([x], [y], marker, ms=5, color=style.MUTED if ghosted else style.ACCENT, clip_on=False)
    points = [
        (pooled["ci_low"], y),
        (pooled["estimate"], y - 0.32),
        (pooled["ci_high"], y),
        (pooled["estimate"], y + 0.32),
    ]
    look: dict[str, Any] = (
        {"facecolor": "none", "edgecolor": style.MUTED, "linestyle": (0, (2, 1.5)), "linewidth": 1.0}
        if ghosted
        else {"facecolor": style.ACCENT, "edgecolor": style.ACCENT, "linewidth": 1.0}
    )
    axes.add_patch(Polygon(points, closed=True, zorder=4, **look))


def axis_note(body: Body) -> str:
    """Say in the caption what the shaded band and the vertical line are."""
    return (
        f"The vertical line is no effect ({no_effect(body['scale'])}); the shaded band holds effects smaller "
        "than the smallest difference that matters."
    )
