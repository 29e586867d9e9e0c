"""An export can be read by others, checked without the store, and turned into a store with the same heads."""

from __future__ import annotations

import csv
import hashlib
import json
import shutil
import sqlite3

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from treering import store
from treering.errors import ProofError, StoreError
from treering.records import NewEntry
from treering.store.audit import audit_store
from treering.store.dictionary import FIELDS, schema_of
from treering.store.exporting import export
from treering.store.importing import import_export, verify_export
from treering.store.projection import BODY_FIELDS
from treering.terms import Cause, EntryKind

EARLY, LATE = "2026-05-04T06:00:00Z", "2026-05-11T06:00:00Z"


def fill(evidence, study, version):
    """Two weekly runs: a correction, a withdrawal, and a version each."""
    result = {"trial": "T1", "outcome": "failed", "values": {"intervention_events": 12, "hazard": 0.25}}
    entries = [
        study("T1", funding=["a fund", "a firm"], note="no column holds this"),
        study("T2", title='Said "ja", in\ntwo lines; größer, \U0001f321', randomised=None),
        NewEntry(EntryKind.RESULT, "result/T1/failed", result, "2021-03-01", "AB", Cause.NEW_TRIAL),
        version(1),
    ]
    evidence.append(entries, known_at=EARLY)
    later = [
        study("T2", title="Corrected", replaces=1, cause=Cause.CORRECTION, reason="misread"),
        NewEntry(EntryKind.WITHDRAWAL, "study/T1", {"reason": "never ran"}, "2026-05-10", "CD", replaces=0),
        version(2),
        NewEntry(EntryKind.RUN, "run/x", {"as_of": LATE, "outcome": "version 2"}, "2026-05-11"),
    ]
    evidence.append(later, known_at=LATE)
    return evidence


@pytest.fixture
def exported(evidence, study, version, tmp_path):
    fill(evidence, study, version)
    made = export(evidence, tmp_path / "export")
    return evidence, made.folder


def rows(folder, name):
    with (folder / "tables" / f"{name}.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def test_import_into_an_empty_store_gives_the_same_entries_and_heads(exported, place):
    evidence, folder = exported
    package = import_export(folder, place)
    with store.open_store(place) as made:
        assert list(made.entries()) == list(evidence.entries())
        heads = [made.head(size) for size in range(made.head().size + 1)]
        assert heads == [evidence.head(size) for size in range(evidence.head().size + 1)]
        assert package.head == made.head()
        assert made.review == evidence.review
        assert {entry.known_at for entry in made.entries()} == {EARLY, LATE}
    assert [fault for check in audit_store(place) for fault in check.faults] == []


def test_export_of_a_version_holds_what_its_head_covers(exported, tmp_path):
    evidence, _ = exported
    made = export(evidence, tmp_path / "first", version=1)
    body = evidence.versions()[0]
    assert (made.head.size, made.head.root) == (body["entries"], body["root"])
    assert verify_export(made.folder).version == 1
    assert [row["live"] for row in rows(made.folder, "study")] == ["true", "true"]
    assert not (made.folder / "tables" / "version.csv").exists()


def test_cells_say_what_the_entries_say(exported):
    evidence, folder = exported
    first, second, third = rows(folder, "study")
    assert (first["trial"], first["randomised"], first["live"]) == ("T1", "120", "false")
    assert json.loads(first["funding"]) == ["a fund", "a firm"]
    assert json.loads(first["more"]) == {"note": "no column holds this"}
    assert second["title"] == 'Said "ja", in\ntwo lines; größer, \U0001f321'
    assert second["randomised"] == ""
    assert (third["cause"], third["reason"], third["replaces"], third["live"]) == (
        "correction",
        "misread",
        "1",
        "true",
    )
    (withdrawn,) = rows(folder, "withdrawal")
    assert (withdrawn["live"], withdrawn["entry_reason"], withdrawn["reason"]) == ("false", "", "never ran")
    hashes = [row["hash"] for row in (first, second, third)]
    assert hashes == [entry.hash for entry in evidence.entries() if entry.kind is EntryKind.STUDY]


def test_each_line_of_the_ledger_hashes_to_its_entry(exported):
    evidence, folder = exported
    lines = (folder / "entries.jsonl").read_bytes().splitlines()
    assert [hashlib.sha256(line).hexdigest() for line in lines] == [e.hash for e in evidence.entries()]


def test_package_lists_every_file_with_its_digest_and_every_column_with_its_meaning(exported):
    """Names of properties: Data Package and Table Schema, specs.frictionlessdata.io, version 1.

    The general-purpose program frictionless 5.21 called every file of an export of the demo review valid
    (December 2026), and found each file whose size was misstated.
    """
    evidence, folder = exported
    package = json.loads((folder / "datapackage.json").read_text())
    assert package["name"] == "invented-review"
    assert package["treering"]["root"] == evidence.head().root
    listed = {resource["path"] for resource in package["resources"]}
    there = {str(p.relative_to(folder)) for p in folder.rglob("*") if p.is_file()}
    assert listed == there - {"datapackage.json"}
    types = {"string", "integer", "number", "boolean", "date", "datetime", "array", "object", "any"}
    for resource in package["resources"]:
        data = (folder / resource["path"]).read_bytes()
        assert resource["hash"] == f"sha256:{hashlib.sha256(data).hexdigest()}"
        assert resource["bytes"] == len(data)
        assert resource["name"] == resource["name"].lower()
        if resource["format"] == "csv":
            header = data.decode().splitlines()[0].split(",")
            assert header == [field["name"] for field in resource["schema"]["fields"]]
            assert all(f["type"] in types and f["description"] for f in resource["schema"]["fields"])
    assert len({resource["name"] for resource in package["resources"]}) == len(package["resources"])


def test_every_cell_is_of_the_type_its_schema_states(exported):
    _, folder = exported
    reads = {
        "integer": int,
        "number": float,
        "boolean": {"true": True, "false": False}.__getitem__,
        "array": lambda text: [*json.loads(text)],
        "object": lambda text: json.loads(text).items(),
        "any": json.loads,
    }
    package = json.loads((folder / "datapackage.json").read_text())
    count = 0
    for resource in package["resources"]:
        if resource["path"].startswith("tables/"):
            for row in rows(folder, resource["path"][7:-4]):
                for field in resource["schema"]["fields"]:
                    # Text that stands in a column of JSON is written as it is.
                    read = reads.get(field["type"], str)
                    if row[field["name"]] and field["type"] != "any":
                        read(row[field["name"]])
                        count += 1
    assert count > 50


@pytest.mark.parametrize("kind", list(EntryKind))
def test_every_column_of_every_kind_has_a_meaning(kind):
    assert set(BODY_FIELDS[kind]) <= set(FIELDS)
    names = [field["name"] for field in schema_of(kind)["fields"]]
    assert len(set(names)) == len(names)


def test_proofs_lead_from_every_version_and_result_to_the_head(exported):
    evidence, folder = exported
    extends = [
        json.loads(line) for line in (folder / "proofs" / "consistency.jsonl").read_bytes().splitlines()
    ]
    roots = [(d["first"]["size"], d["first"]["root"]) for d in extends]
    assert roots == [(body["entries"], body["root"]) for body in evidence.versions()]
    (inclusion,) = (folder / "proofs" / "inclusion.jsonl").read_bytes().splitlines()
    assert json.loads(inclusion)["seq"] == 2


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """An export that stays as it is, made of a store on SQLite."""
    place = tmp_path_factory.mktemp("export")
    with store.create(place / "evidence.db", review="invented review") as made:
        body = {"trial": "T1", "title": "Invented", "year": 2021}
        made.append([NewEntry(EntryKind.STUDY, "study/T1", body, "2021-03-01", "AB")], known_at=EARLY)
        made.append([NewEntry(EntryKind.VERSION, "version/1", {"version": 1}, "2026-05-04")], known_at=EARLY)
        return export(made, place / "export").folder


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_any_one_changed_byte_of_an_export_is_found(folder, tmp_path_factory, data):
    again = tmp_path_factory.mktemp("changed") / "export"
    shutil.copytree(folder, again)
    files = sorted(p for p in again.rglob("*") if p.is_file() and p.stat().st_size)
    path = data.draw(st.sampled_from(files))
    content = bytearray(path.read_bytes())
    place = data.draw(st.integers(0, len(content) - 1))
    content[place] = data.draw(st.integers(0, 255).filter(lambda byte: byte != content[place]))
    path.write_bytes(content)
    try:
        verify_export(again)
    except ProofError:
        return
    # In the list of files, words for people and white space carry no evidence.
    assert path.name == "datapackage.json"
    before, after = (json.loads((f / path.name).read_bytes()) for f in (folder, again))
    kept = ("path", "hash")
    assert [[r[k] for k in kept] for r in before["resources"]] == [
        [r[k] for k in kept] for r in after["resources"]
    ]
    assert {k: v for k, v in before["treering"].items() if k in ("size", "root")} == {
        k: v for k, v in after["treering"].items() if k in ("size", "root")
    }


def forge(folder, path, old, new):
    """Change a file and everything in the package that speaks of its bytes."""
    file = folder / path
    file.write_bytes(file.read_bytes().replace(old, new))
    package = json.loads((folder / "datapackage.json").read_text())
    for resource in package["resources"]:
        if resource["path"] == path:
            resource["hash"] = f"sha256:{hashlib.sha256(file.read_bytes()).hexdigest()}"
    (folder / "datapackage.json").write_text(json.dumps(package))


@pytest.mark.parametrize(
    ("path", "old", "new", "message"),
    [
        ("tables/study.csv", b"Invented", b"Imagined", "does not say what the entries say"),
        ("entries.jsonl", b"Invented", b"Imagined", "does not follow the entry before"),
        ("proofs/consistency.jsonl", b'"size":1', b'"size":2', "does not extend|does not hold"),
    ],
)
def test_a_forged_file_with_a_fitting_digest_is_found(folder, tmp_path, path, old, new, message):
    again = tmp_path / "export"
    shutil.copytree(folder, again)
    forge(again, path, old, new)
    with pytest.raises(ProofError, match=message):
        verify_export(again)
    with pytest.raises(ProofError):
        import_export(again, tmp_path / "evidence.db")
    assert not (tmp_path / "evidence.db").exists()


def test_import_goes_into_an_empty_store_of_the_same_review_only(folder, tmp_path):
    import_export(folder, tmp_path / "evidence.db")
    with pytest.raises(StoreError, match="empty store"):
        import_export(folder, tmp_path / "evidence.db")
    store.create(tmp_path / "other.db", review="another").close()
    with pytest.raises(StoreError, match="same review"):
        import_export(folder, tmp_path / "other.db")


def test_nothing_is_written_over(exported):
    evidence, folder = exported
    with pytest.raises(StoreError, match="never overwrites"):
        export(evidence, folder)
    with pytest.raises(StoreError, match="no such version"):
        export(evidence, folder.with_name("other"), version=3)
    assert [p.name for p in folder.parent.iterdir() if "draft" in p.name or p.name == "other"] == []


def test_other_folders_are_no_exports(tmp_path):
    with pytest.raises(ProofError, match="no export"):
        verify_export(tmp_path)
    (tmp_path / "datapackage.json").write_text('{"treering": {"format": 2}}')
    with pytest.raises(ProofError, match="no export"):
        verify_export(tmp_path)


def test_an_import_that_fails_half_way_leaves_nothing(folder, tmp_path, monkeypatch):
    def fail(*_, **__):
        raise sqlite3.OperationalError("database or disk is full")

    monkeypatch.setattr("treering.store.copying.plan", fail)
    with pytest.raises(StoreError, match="disk"):
        import_export(folder, tmp_path / "evidence.db")
    assert list(tmp_path.iterdir()) == []
