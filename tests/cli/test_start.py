"""Starting a review, and what `check` says of a config that is not filled in."""

from __future__ import annotations

import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from treering.update import read_review

#: What a person types into the blank config, field by field.
FILLED = {
    "id": ("warm-hands", "AB", "failed"),
    "title": ("Warm hands", "Failed first attempt"),
    "question": ("Does warming help?", "Fewer failures?"),
    "intervention": ("warming",),
    "comparator": ("no warming",),
    "name": ("A. Reader",),
    "effect_reason": ("agreed by the panel",),
    "diversity_reason": ("no heterogeneity expected",),
}


def fill_in(config: Path) -> None:
    """Fill in every empty field in the order in which it stands, as a person would."""
    text = config.read_text()
    for field, values in FILLED.items():
        for value in values:
            text = re.sub(rf'^{field} = ""', f'{field} = "{value}"', text, count=1, flags=re.M)
    text = text.replace("# minimally_important =   ", "minimally_important = 0.8   #")
    text = text.replace("# effect =   ", "effect = 0.75   #")
    config.write_text(text)


def test_start_names_the_files_it_made(run: Callable[..., Any], tmp_path: Path) -> None:
    ran = run("start", tmp_path / "new")
    assert ran.status == 0
    assert ran.out.split() == [
        str(tmp_path / "new" / "config" / name) for name in ("review.toml", "panel.toml")
    ]
    assert "treering check" in ran.err
    assert {path.name for path in (tmp_path / "new").iterdir()} == {"config", "intake", "store", "reports"}


def test_start_never_touches_a_review_that_is_there(
    run: Callable[..., Any], review: Any, digests: Callable[..., Any]
) -> None:
    before = digests(review.folder)
    ran = run("start", review.folder)
    assert (ran.status, ran.out) == (1, "")
    assert "a review is there already" in ran.err
    assert digests(review.folder) == before


def test_an_unfilled_config_gets_one_sentence_for_each_missing_field(
    run: Callable[..., Any], tmp_path: Path
) -> None:
    run("start", tmp_path)
    ran = run("check", tmp_path)
    assert (ran.status, ran.out) == (1, "")
    head, *faults = ran.err.splitlines()
    assert "config/review.toml: 14 faults; correct what is named and run again." in head
    assert [fault.split(":")[0].strip() for fault in faults] == [
        *(f"review.{name}" for name in ("id", "title", "question", "intervention", "comparator")),
        *(f"people 1.{name}" for name in ("id", "name")),
        *(f"outcomes 1.{name}" for name in ("id", "title", "question", "minimally_important")),
        *(f"outcomes 1.monitoring.{name}" for name in ("effect", "effect_reason", "diversity_reason")),
    ]
    assert all("this field is" in fault and fault.endswith(".") for fault in faults)


def test_a_filled_in_config_passes(run: Callable[..., Any], tmp_path: Path) -> None:
    run("start", tmp_path)
    fill_in(tmp_path / "config" / "review.toml")
    ran = run("check", tmp_path)
    assert ran.status == 0, ran.err
    assert "An update would lay down no version." in ran.out
    assert "names 1 person as extractor; verification needs 2." in ran.out
    assert "names no person as adjudicator; verification needs 1." in ran.out
    assert read_review(tmp_path).protocol.outcomes[0].monitoring is not None


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('measure = "risk-ratio"', 'measure = "chance"', "outcomes 1.measure: "),
        ("effect = 0.75", "effect = 1.0", "monitoring.effect is the no-effect value"),
        ("format = 1", "format = 1\nfrmat = 2", "frmat: there is no such field (found 2)."),
        ("alpha = 0.05", "alpha = 5", "outcomes 1.monitoring.alpha: "),
        ('role = "benefit"', 'role = "benefit', "the file can't be read: "),
    ],
)
def test_a_fault_in_the_config_is_told_with_its_place(
    run: Callable[..., Any], tmp_path: Path, old: str, new: str, words: str
) -> None:
    run("start", tmp_path)
    config = tmp_path / "config" / "review.toml"
    fill_in(config)
    text = config.read_text()
    assert old in text
    config.write_text(text.replace(old, new, 1))
    ran = run("check", tmp_path)
    assert (ran.status, ran.out) == (1, "")
    assert words in ran.err
