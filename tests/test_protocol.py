"""The protocol file: one sentence per fault, a digest over the plan alone, private sections kept apart."""

from __future__ import annotations

from pathlib import Path

import pytest

from treering.errors import ProtocolError
from treering.protocol import public_text, read_panel, read_protocol

DEMO = Path(__file__).parents[1] / "config" / "review.toml"


def written(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "review.toml"
    path.write_text(text)
    return path


def test_the_demo_protocol_reads() -> None:
    protocol = read_protocol(DEMO)
    assert protocol.review.invented
    assert [outcome.role.value for outcome in protocol.outcomes] == ["benefit", "benefit", "benefit", "harm"]


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ("alpha = 0.05", "alpha = 0.7", "monitoring.alpha"),
        ("power = 0.9", "power = 0.01", "power must be above"),
        ("effect = 0.75 ", "effect = 1.0 ", "no-effect value"),
        ("effect = 0.75 ", "effect = -1 ", "must be above 0"),
        ("diversity = 0.25 ", "diversity = 1.0 ", "diversity"),
        ('id = "pain"', 'id = "failed-first-attempt"', "stands twice"),
        ('measure = "risk-ratio"', 'measure = "relative"', "measure"),
        ("reread_share", "reread_shared", "reread_shared"),
        ("format = 1", "format = 2", "format"),
    ],
)
def test_a_fault_is_one_sentence_with_its_place(tmp_path: Path, old: str, new: str, sentence: str) -> None:
    text = DEMO.read_text()
    assert old in text
    with pytest.raises(ProtocolError, match=sentence) as caught:
        read_protocol(written(tmp_path, text.replace(old, new, 1)))
    assert "review.toml" in str(caught.value)


def test_a_harm_with_a_futility_stop_is_refused(tmp_path: Path) -> None:
    text = DEMO.read_text().replace('spending = "pocock"', 'futility = true\nspending = "pocock"')
    with pytest.raises(ProtocolError, match="no futility stop"):
        read_protocol(written(tmp_path, text))


def test_looks_of_a_mantel_haenszel_outcome_are_refused(tmp_path: Path) -> None:
    text = DEMO.read_text().replace('model = "common"', 'method = "mantel-haenszel"')
    with pytest.raises(ProtocolError, match="inverse-variance"):
        read_protocol(written(tmp_path, text))


def test_the_digest_is_over_the_plan_alone(tmp_path: Path) -> None:
    text = DEMO.read_text()
    same = text.replace("update_every_days = 7", "update_every_days = 14").replace(
        "T. R. (invented)", "R. T."
    )
    other = text.replace("reread_share = 0.10", "reread_share = 0.20")
    digest = read_protocol(DEMO).digest()
    assert read_protocol(written(tmp_path, same)).digest() == digest
    assert read_protocol(written(tmp_path, other)).digest() != digest


def test_private_sections_are_cut_out_whole() -> None:
    text = 'a = 1\n[store]  # where\nurl = "postgresql://u:pw@h/db"\n[x]\nb = 2\n[delivery]\nsender = "u"\n'
    assert public_text(text, "review.toml") == "a = 1\n[x]\nb = 2\n"


def test_a_private_section_in_another_form_is_refused() -> None:
    with pytest.raises(ProtocolError, match="sections of their own"):
        public_text('store.url = "postgresql://u:secret@h/db"\n', "review.toml")


def test_a_missing_file_says_what_to_do(tmp_path: Path) -> None:
    with pytest.raises(ProtocolError, match="treering start"):
        read_protocol(tmp_path / "none.toml")


def test_a_member_told_by_mail_needs_an_address(tmp_path: Path) -> None:
    path = tmp_path / "panel.toml"
    path.write_text('format = 1\n[[members]]\nid = "a"\nname = "A"\nchannel = "email"\n')
    with pytest.raises(ProtocolError, match="needs an address"):
        read_panel(path)
