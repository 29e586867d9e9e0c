"""The figures of a report as SVG text: forest, monitoring on the effect scale, monitoring on the Z scale.

matplotlib is imported only when a figure is made.
"""

from treering.report.figures.forest import forest_figure
from treering.report.figures.monitoring_effect import effect_figure
from treering.report.figures.monitoring_z import z_figure

__all__ = ["effect_figure", "forest_figure", "z_figure"]
