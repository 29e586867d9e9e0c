"""The sign of a review: one ring per version, the newest in the accent colour."""

from __future__ import annotations

import math

from markupsafe import Markup

MOST = 40


def rings(versions: int) -> Markup:
    """Draw the rings as decoration (hidden from screen readers).

    Parameters
    ----------
    versions : int
        Number of versions laid down; beyond 40 the inner ones are not drawn apart.

    Returns
    -------
    Markup
        One ``svg`` element.
    """
    shown = max(1, min(versions, MOST))
    step = 46.0 / shown
    circles = []
    for i in range(1, shown + 1):
        last = i == shown
        # A tree's rings are not circles: a slow wave that grows outward, the same for every run.
        points = " ".join(_point(i * step, 2 * math.pi * j / 48, i) for j in range(48))
        colour, width = ("var(--accent, #0b5e5f)", 3.2) if last else ("var(--rule, #b9c4c4)", 1.1)
        circles.append(f'<polygon points="{points}" fill="none" stroke="{colour}" stroke-width="{width}"/>')
    inner = "".join(circles)
    return Markup(f'<svg class="rings" viewBox="-50 -50 100 100" aria-hidden="true">{inner}</svg>')


def _point(radius: float, angle: float, ring: int) -> str:
    wave = 1 + 0.025 * math.sin(3 * angle + 0.35 * ring) + 0.015 * math.sin(7 * angle)
    return f"{radius * wave * math.cos(angle):.2f},{radius * wave * math.sin(angle):.2f}"
