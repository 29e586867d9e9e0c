"""The intake folder: what is read, and where a file goes, also after a kill in between."""

from __future__ import annotations

import os

import pytest

from treering import intake
from treering.errors import IntakeError
from treering.intake import Dropped
from treering.intake import folder as shelf


@pytest.fixture
def drop(tmp_path):
    def write(name: str, text: str = "x = 1\n"):
        (tmp_path / name).write_text(text)
        return next(f for f in intake.read_folder(tmp_path) if f.name == name)

    return write


def test_hidden_unfinished_and_moved_files_are_left_alone(tmp_path) -> None:
    for name in (".hidden", "a.toml", "b.csv.part", "c.toml~", "~$d.csv", "e.tmp"):
        (tmp_path / name).write_text("x")
    (tmp_path / "filed").mkdir()
    (tmp_path / "filed" / "f.toml").write_text("x")
    assert [file.name for file in intake.read_folder(tmp_path)] == ["a.toml"]


def test_files_come_sorted_by_name(tmp_path) -> None:
    for name in ("b.toml", "a.toml", "c.toml"):
        (tmp_path / name).write_text("x")
    assert [file.name for file in intake.read_folder(tmp_path)] == ["a.toml", "b.toml", "c.toml"]


def test_a_missing_folder_is_an_intake_error(tmp_path) -> None:
    with pytest.raises(IntakeError, match="can't be listed"):
        intake.read_folder(tmp_path / "no")


def test_a_link_goes_back_with_a_sentence(tmp_path) -> None:
    (tmp_path / "a.toml").symlink_to("/etc/hostname")
    (dropped,) = intake.read_folder(tmp_path)
    (fault,) = intake.read_records([dropped]).faults
    assert "a link or a device, not a file" in str(fault)
    target = intake.give_back(tmp_path, dropped, [fault])
    assert target is not None
    assert target.is_symlink()


def test_a_name_that_is_no_text_goes_back(tmp_path) -> None:
    path = os.fsencode(tmp_path) + b"/caf\xe9.toml"
    with open(path, "wb") as stream:  # noqa: PTH123 (a name that Path can hold only escaped)
        stream.write(b"x = 1")
    (dropped,) = intake.read_folder(tmp_path)
    (fault,) = intake.read_records([dropped]).faults
    str(fault).encode("utf-8")
    assert intake.give_back(tmp_path, dropped, [fault]) is not None
    assert intake.read_folder(tmp_path) == []


def test_an_accepted_file_lies_in_filed(tmp_path, drop) -> None:
    target = intake.file_away(tmp_path, drop("a.toml"))
    assert target == tmp_path / "filed" / "a.toml"
    assert target.read_text() == "x = 1\n"
    assert intake.read_folder(tmp_path) == []


def test_an_earlier_file_of_the_same_name_is_never_overwritten(tmp_path, drop) -> None:
    intake.file_away(tmp_path, drop("a.toml", "one"))
    target = intake.file_away(tmp_path, drop("a.toml", "two"))
    assert target.name == "a-2.toml"
    assert (tmp_path / "filed" / "a.toml").read_text() == "one"


def test_a_refused_file_has_its_reasons_beside_it(tmp_path, drop) -> None:
    target = intake.give_back(tmp_path, drop("a.toml"), ["a.toml: one.", "a.toml: two."])
    assert target == tmp_path / "returned" / "a.toml"
    assert shelf.reason_path(target).read_text() == "a.toml: one.\na.toml: two.\n"


def test_refused_twice_keeps_both_files_and_both_reasons(tmp_path, drop) -> None:
    intake.give_back(tmp_path, drop("a.toml", "one"), ["first."])
    target = intake.give_back(tmp_path, drop("a.toml", "two"), ["second."])
    assert target.name == "a-2.toml"
    assert (tmp_path / "returned" / "a.toml.reason.txt").read_text() == "first.\n"
    assert (tmp_path / "returned" / "a-2.toml.reason.txt").read_text() == "second.\n"


def test_a_kill_between_reason_and_move_leaves_no_second_reason(tmp_path, drop, monkeypatch) -> None:
    dropped = drop("a.toml")

    def killed(self, target):
        raise KeyboardInterrupt

    with monkeypatch.context() as patch:
        patch.setattr(type(tmp_path), "rename", killed)
        with pytest.raises(KeyboardInterrupt):
            intake.give_back(tmp_path, dropped, ["first."])
    assert (tmp_path / "a.toml").exists()
    intake.give_back(tmp_path, dropped, ["first."])
    assert sorted(p.name for p in (tmp_path / "returned").iterdir()) == ["a.toml", "a.toml.reason.txt"]


def test_a_file_changed_after_reading_stays_for_the_next_run(tmp_path, drop) -> None:
    dropped = drop("a.toml", "one")
    (tmp_path / "a.toml").write_text("two")
    assert intake.file_away(tmp_path, dropped) is None
    assert (tmp_path / "a.toml").read_text() == "two"


def test_a_file_that_is_gone_was_moved_by_an_earlier_run(tmp_path) -> None:
    assert intake.file_away(tmp_path, Dropped.of("a.toml", b"x")) is None


@pytest.mark.skipif(os.geteuid() == 0, reason="root can write everywhere")
def test_a_folder_that_cannot_be_written_is_an_intake_error(tmp_path, drop) -> None:
    dropped = drop("a.toml")
    tmp_path.chmod(0o500)
    with pytest.raises(IntakeError, match="can't be moved"):
        intake.file_away(tmp_path, dropped)
    tmp_path.chmod(0o700)


def test_a_shelf_that_is_a_file_is_an_intake_error(tmp_path, drop) -> None:
    dropped = drop("a.toml")
    (tmp_path / "filed").write_text("in the way")
    with pytest.raises(IntakeError, match=r"can't be moved to filed/"):
        intake.file_away(tmp_path, dropped)
    assert (tmp_path / "a.toml").exists()
