"""A view refuses what it can't show."""

from __future__ import annotations

import pytest

from treering.errors import ReportError
from treering.report import build_view


def parts(view):
    return {
        "protocol": view.protocol,
        "version": view.version,
        "store_head": view.store_head,
        "analyses": view.analyses,
        "previous_analyses": view.previous_analyses,
        "changes": view.changes,
        "status": view.status,
    }


def test_a_version_without_its_digest_is_refused(view_of):
    given = parts(view_of(1))
    given["version"] = {k: v for k, v in given["version"].items() if k != "protocol_digest"}
    with pytest.raises(ReportError, match="protocol_digest"):
        build_view(**given)


def test_a_list_nobody_knows_is_refused(view_of):
    with pytest.raises(ReportError, match="rumours"):
        build_view(**parts(view_of(1)), rumours=[])


def test_a_synthesis_outside_the_protocol_is_refused(view_of):
    given = parts(view_of(1))
    given["analyses"] = {"mood": given["analyses"]["pain"]}
    with pytest.raises(ReportError, match="mood"):
        build_view(**given)


def test_a_number_that_is_not_finite_never_reaches_a_page(view_of):
    given = parts(view_of(1))
    given["analyses"] = {"pain": {**given["analyses"]["pain"], "mid": float("nan")}}
    with pytest.raises(ReportError, match=r"pain\.mid"):
        build_view(**given)
