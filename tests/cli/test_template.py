"""Blank forms: what `template` writes, a person fills in and the intake accepts."""

from __future__ import annotations

import csv
import io
import re
import tomllib
from collections.abc import Callable
from typing import Any

import pytest

COUNTS = {
    "intervention_events": 24,
    "intervention_total": 110,
    "comparator_events": 33,
    "comparator_total": 108,
}
FORMS = {"AA": "toml", "BB": "csv"}


def fill_toml(form: str) -> str:
    """Take the # away from lines and write what the report says."""
    text = form.replace("# published = 2026-01-31", "published = 2025-03-04")
    for field, value in COUNTS.items():
        text = re.sub(rf"^# {field} =$", f"{field} = {value}", text, flags=re.M)
    return re.sub(r'^# locator = ""', 'locator = "table 2"', text, flags=re.M)


def fill_csv(form: str) -> str:
    """Fill in the cells of the one row."""
    reader = csv.DictReader(io.StringIO(form))
    (row,) = reader
    row |= {name: str(value) for name, value in COUNTS.items()}
    row |= {"published": "2025-03-04", "locator": "table 2"}
    text = io.StringIO()
    writer = csv.DictWriter(text, list(reader.fieldnames or ()))
    writer.writeheader()
    writer.writerow(row)
    return text.getvalue()


def test_the_form_is_data_on_stdout(run: Callable[..., Any], review: Any) -> None:
    ran = run("template", "T1", "AA", "--folder", review.folder)
    assert (ran.status, ran.err) == (0, "")
    form = tomllib.loads(ran.out)
    assert (form["record"], form["trial"], form["extractor"]) == ("extraction", "T1", "AA")
    assert [result["outcome"] for result in form["results"]] == ["failed"]
    assert not ran.out.endswith("\n\n")


def test_output_writes_a_file_and_never_over_one(run: Callable[..., Any], review: Any) -> None:
    target = review.folder / "form.toml"
    command = ("template", "T1", "AA", "--folder", review.folder, "--output", target)
    ran = run(*command)
    assert (ran.status, ran.out) == (0, "")
    written = target.read_text()
    assert tomllib.loads(written)["trial"] == "T1"
    again = run(*command)
    assert (again.status, again.out) == (1, "")
    assert again.err == f"{target}: File exists.\n"
    assert target.read_text() == written


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("T1", "ZZ"), "the extractor is not in the protocol. Found: ZZ."),
        (("T1", "AA", "--form", "odt"), "odt"),
    ],
)
def test_a_form_that_cannot_be_made_is_refused(
    run: Callable[..., Any], review: Any, arguments: tuple[str, ...], words: str
) -> None:
    ran = run("template", *arguments, "--folder", review.folder)
    assert (ran.status, ran.out) == (1, "")
    assert words in ran.err


def test_two_filled_in_forms_of_either_kind_make_a_verified_result(
    run: Callable[..., Any], review: Any
) -> None:
    for person, form in FORMS.items():
        blank = run("template", "T1", person, "--form", form, "--folder", review.folder).out
        review.drop(f"T1-{person}.{form}", (fill_toml if form == "toml" else fill_csv)(blank))
    ran = run("check", review.folder)
    assert ran.status == 0, ran.out
    assert "verified: T1, failed" in ran.out
    assert "An update would lay down a new version." in ran.out


@pytest.mark.parametrize("form", ["toml", "csv"])
def test_a_blank_form_dropped_as_it_is_never_becomes_a_result(
    run: Callable[..., Any], review: Any, form: str
) -> None:
    for person in FORMS:
        blank = run("template", "T1", person, "--form", form, "--folder", review.folder).out
        review.drop(f"T1-{person}.{form}", blank)
    ran = run("check", review.folder, "--json")
    assert '"verified": []' in ran.out
