"""One look for all figures, and SVG text that is the same bytes for the same input.

Colours are written as CSS variables with a fallback, so that a figure inlined in the page follows its
light, dark and print styles, and the same file still reads well alone. One accent (deep teal) and greys
only: what differs is told by shape, line style and word, so colour-blind readers and black-and-white
printers lose nothing.
"""

from __future__ import annotations

import io
import math
import re
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any
from xml.sax.saxutils import escape

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.lines import Line2D

INK = "#1b2b2f"
MUTED = "#5b6a6e"
FAINT = "#b9c4c4"
ACCENT = "#0b5e5f"
WASH = "#dfecea"
PAPER = "#fdfcf9"

_VARIABLES = {
    INK: "--ink",
    MUTED: "--muted",
    FAINT: "--rule",
    ACCENT: "--accent",
    WASH: "--wash",
    PAPER: "--paper",
}
FONT = "system-ui, -apple-system, 'Segoe UI', 'Noto Sans', 'DejaVu Sans', Arial, sans-serif"
WIDTH = 9.0
SIZE = 9.0

_SETTINGS: Any = {
    "svg.fonttype": "none",
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": SIZE,
    "text.color": INK,
    "axes.facecolor": "none",
    "axes.edgecolor": FAINT,
    "axes.labelcolor": MUTED,
    "xtick.color": MUTED,
    "ytick.color": MUTED,
    "axes.linewidth": 0.8,
    "lines.solid_capstyle": "butt",
    "axes.unicode_minus": True,
    "path.simplify": False,
    "text.parse_math": False,
    "text.usetex": False,
}


def new_figure(height: float) -> Figure:
    """Return an empty figure of the common width, apart from any global state of matplotlib.

    Parameters
    ----------
    height : float
        Height in inches.

    Returns
    -------
    Figure
    """
    from matplotlib.figure import Figure

    return Figure(figsize=(WIDTH, height), facecolor="none")


def settings() -> Any:
    """Return the context in which a figure is drawn and written."""
    import matplotlib

    return matplotlib.rc_context(_SETTINGS)


def to_svg(figure: Figure, name: str, title: str, description: str) -> str:
    """Write a figure as SVG without date, ids that clash in one page, or anything that varies by run.

    Parameters
    ----------
    figure : Figure
        The drawing.
    name : str
        Unique in the page; salts the ids of clip paths and markers.
    title, description : str
        Read aloud in place of the picture.

    Returns
    -------
    str
        One ``svg`` element.
    """
    import matplotlib

    buffer = io.StringIO()
    with matplotlib.rc_context({**_SETTINGS, "svg.hashsalt": f"treering-{name}"}):
        figure.savefig(buffer, format="svg", metadata={"Date": None, "Creator": None})
    return _tidy(buffer.getvalue(), name, title, description)


def _tidy(svg: str, name: str, title: str, description: str) -> str:
    body = svg[svg.index("<svg") :]
    body = re.sub(r"<!--.*?-->\n?", "", body, flags=re.DOTALL)
    body = re.sub(r"<metadata>.*?</metadata>\n?", "", body, flags=re.DOTALL)
    body = re.sub(r'<g id="[^"]*"', "<g", body)
    for colour, variable in _VARIABLES.items():
        body = body.replace(colour, f"var({variable}, {colour})")
    body = body.replace("'DejaVu Sans', sans-serif", FONT)
    # A style element inside an inlined svg would reach the whole page.
    body = re.sub(r"<defs>\s*<style.*?</style>\s*</defs>\n?", "", body, flags=re.DOTALL)
    view = re.search(r'viewBox="[^"]*"', body)
    box = view.group(0) if view else ""
    head = (
        '<svg xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink" '
        f'{box} role="img" aria-labelledby="{name}-title {name}-desc" style="stroke-linejoin: round">\n'
        f'<title id="{name}-title">{escape(title)}</title>\n'
        f'<desc id="{name}-desc">{escape(description)}</desc>'
    )
    return re.sub(r"<svg[^>]*>", lambda _: head, body, count=1).rstrip() + "\n"


def ticks(low: float, high: float, scale: str, *, most: int = 7) -> list[tuple[float, str]]:
    """Choose tick positions on the analysis scale with their natural-scale labels.

    Parameters
    ----------
    low, high : float
        Range of the axis, analysis scale.
    scale : str
        "log" or "plain".
    most : int
        Largest number of ticks wanted.

    Returns
    -------
    list of (position, label)
        The no-effect value is among them when it lies in the range.
    """
    if scale != "log":
        return _even_ticks(low, high, most)
    if high - low < math.log(2):  # so narrow that even steps of the ratio itself read best
        return [
            (math.log(float(label)), label) for _, label in _even_ticks(math.exp(low), math.exp(high), most)
        ]
    digits = ((1, 1.25, 1.5, 2, 2.5, 3, 4, 5, 6, 8), (1, 1.5, 2, 3, 5, 7), (1, 2, 5), (1, 3), (1,))
    for mantissas in digits:
        values = {m * 10.0**e for e in range(-6, 7) for m in mantissas}
        # Below 1 the reciprocals look odd; the decimals readers know are taken.
        chosen = sorted(v for v in values if low <= math.log(v) <= high)
        if len(chosen) <= most:
            break
    else:
        # Whole powers of ten are still too many: keep every second, third ... counted from 1.
        step = -(-len(chosen) // most)
        chosen = [v for v in chosen if round(math.log10(v)) % step == 0]
    return [(math.log(v), f"{v:.6f}".rstrip("0").rstrip(".")) for v in chosen]


def _even_ticks(low: float, high: float, most: int) -> list[tuple[float, str]]:
    span = high - low
    raw = span / most
    power = 10.0 ** math.floor(math.log10(raw))
    step = next(power * m for m in (1, 2, 2.5, 5, 10) if power * m >= raw)
    first = math.ceil(low / step - 1e-9)
    last = math.floor(high / step + 1e-9)
    return [(i * step, f"{round(i * step, 10):.10g}".replace("-", "\u2212")) for i in range(first, last + 1)]


def bare(axes: Axes, *keep: str) -> None:
    """Hide all frame lines but those named."""
    for side, spine in axes.spines.items():
        spine.set_visible(side in keep)


def end_words(axes: Axes, name: str, up: str, down: str, *, below: float) -> None:
    """Name an upright axis and both its directions outside the drawing, where nothing can cover them."""
    axes.text(0.0, 1.1, name, transform=axes.transAxes, color=MUTED, va="bottom")
    axes.text(0.0, 1.02, up, transform=axes.transAxes, color=MUTED, va="bottom", fontsize=8.5)
    axes.text(0.0, below, down, transform=axes.transAxes, color=MUTED, va="top", fontsize=8.5)


def key(axes: Axes, handles: Sequence[Line2D], *, lift: float) -> None:
    """Put the key in one line above the drawing."""
    axes.legend(
        handles=handles,
        loc="lower right",
        bbox_to_anchor=(1.0, lift),
        ncols=len(handles),
        frameon=False,
        fontsize=8,
        handlelength=1.8,
        columnspacing=1.3,
        borderaxespad=0.2,
    )


def at_most(text: str, length: int) -> str:
    """Cut a long name at a word, with an ellipsis."""
    if len(text) <= length:
        return text
    return text[: length - 1].rsplit(" ", 1)[0].rstrip(",;: ") + "\u2026"
