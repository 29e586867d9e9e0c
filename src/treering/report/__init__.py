"""The dated report of one version: page, figures, tables and report.json; same input, same bytes."""

from treering.report.render import build_files, render, render_index
from treering.report.report_json import report_json
from treering.report.view import ReportView, build_view

__all__ = ["ReportView", "build_files", "build_view", "render", "render_index", "report_json"]
