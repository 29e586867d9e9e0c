"""The audit finds what was altered, and says where; a sound store passes every check."""

from __future__ import annotations

import json
import shutil
import sqlite3
from contextlib import closing

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from sqlalchemy import create_engine
from sqlalchemy.exc import DBAPIError

from treering import store
from treering.errors import StoreError
from treering.records import NewEntry
from treering.store import audit_schema
from treering.store.audit import audit_store
from treering.store.audit_schema import audit_engine
from treering.store.checkpoint import Checkpoint
from treering.store.connection import store_url
from treering.store.models import METADATA
from treering.terms import Cause, EntryKind

REVIEW = "audited review"
EARLY, LATE = "2026-05-04T06:00:00Z", "2026-05-11T06:00:00Z"
ABOUT = {"trial": "T1", "outcome": "failed"}
VALUES = {"intervention_events": 12, "comparator_events": 21.5, "p": 1e-7}


def new(kind, key, body, **more):
    return NewEntry(kind, key, body, "2026-05-01", **more)


def readings(adjudicator="EF", **verified):
    """Two readings of one result, an adjudication, the verification and the result; the first is entry 1."""
    verification = {
        "basis": "adjudicated",
        "extractors": ["AB", "CD"],
        "adjudicator": adjudicator,
        "extractions": [1, 2],
        "adjudication": 3,
        "fields": 2,
        "differences": [{"field": "comparator_events", "first": 21, "second": 22}],
        "reread": False,
    }
    read = [
        new(
            EntryKind.EXTRACTION,
            f"extraction/T1/failed/{who}",
            ABOUT | {"extractor": who, "values": VALUES},
            by=who,
        )
        for who in ("AB", "CD")
    ]
    decision = ABOUT | {"adjudicator": adjudicator, "values": VALUES, "unresolved": False}
    return [
        *read,
        new(EntryKind.ADJUDICATION, "adjudication/T1/failed", decision, by=adjudicator),
        new(EntryKind.VERIFICATION, "verification/T1/failed", ABOUT | verification | verified),
        new(
            EntryKind.RESULT,
            "result/T1/failed",
            ABOUT | {"values": VALUES, "verification": "verification/T1/failed"},
        ),
    ]


def a_week(number, replaces=None):
    """The entries that one version brings."""
    notice = f"notice/{number}/failed/crossed/chair"
    to = {"notice": notice, "person": "chair"}
    return (
        [
            new(
                EntryKind.LOOK,
                f"look/failed/{number}",
                {"synthesis": "failed", "number": number, "version": number, "z": 1.25, "spends": True},
            ),
            new(
                EntryKind.ANALYSIS,
                f"analysis/failed/{number}",
                {
                    "synthesis": "failed",
                    "version": number,
                    "k": 1,
                    "participants": 238.0,
                    "pooled": {"z": 1.25},
                },
            ),
            new(EntryKind.VERSION, f"version/{number}", {"version": number, "date": "2026-05-04"}),
        ],
        [
            new(
                EntryKind.NOTICE,
                notice,
                {"version": number, "event": "crossed", "person": "chair", "text": "Grüße"},
            ),
            new(EntryKind.RELEASE, f"release/{number}", {"version": number, "files": {"report.json": "ab"}}),
            new(EntryKind.DELIVERY, f"delivery/{notice}", to | {"detail": {"to": ["chair"]}}),
            new(EntryKind.ACKNOWLEDGEMENT, f"acknowledgement/{notice}", to | {"date": "2026-05-05"}),
            new(EntryKind.RUN, f"run/{number}", {"as_of": EARLY, "version": number, "returned": []}),
        ],
    )


def fill(place, title="Invented"):
    """Lay down two versions of a small review, a correction, a withdrawal, and fillers for one kept node."""
    with store.create(place, review=REVIEW) as made:
        study = new(
            EntryKind.STUDY, "study/T1", {"trial": "T1", "title": title, "year": 2021}, cause=Cause.NEW_TRIAL
        )
        fillers = [new(EntryKind.STUDY, f"study/F{n}", {"trial": f"F{n}"}) for n in range(250)]
        made.append([study, *readings(), *fillers], known_at=EARLY)
        for part in a_week(1):
            made.append(part, known_at=EARLY)
        fixed = {"trial": "T1", "title": "Corrected", "year": 2022}
        made.append([new(EntryKind.STUDY, "study/T1", fixed, replaces=0, reason="misread")], known_at=LATE)
        made.append([new(EntryKind.WITHDRAWAL, "study/F0", {"reason": "ongoing"}, replaces=6)], known_at=LATE)
        for part in a_week(2):
            made.append(part, known_at=LATE)
        return made.head()


@pytest.fixture(scope="module", params=["sqlite", "postgresql"])
def sound(request, tmp_path_factory):
    """A sound store that stays as it is."""
    if request.param == "sqlite":
        place = str(tmp_path_factory.mktemp("sound") / "evidence.db")
    else:
        place = request.getfixturevalue("cluster").fresh()
    fill(place)
    return place


@pytest.fixture(scope="module")
def original(tmp_path_factory):
    """A sound store on SQLite that stays as it is, with its head."""
    place = tmp_path_factory.mktemp("original") / "evidence.db"
    return place, fill(place)


@pytest.fixture
def damaged(original, tmp_path):
    """A copy of the sound store that may be altered."""
    place = tmp_path / "evidence.db"
    shutil.copy(original[0], place)
    return place


def alter(place, *statements, values=()):
    """Change a SQLite store as someone who owns the file can, leaving its triggers as they were."""
    with closing(sqlite3.connect(place, isolation_level=None)) as connection:
        triggers = connection.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
        for name, _ in triggers:
            connection.execute(f'DROP TRIGGER "{name}"')
        for statement in statements:
            connection.execute(statement, values if "?" in statement else ())
        for _, sql in triggers:
            connection.execute(sql)


def failed(place, **options):
    return {c.number: c.faults for c in audit_store(place, review=REVIEW, **options) if not c.holds}


def test_sound_store_passes_every_check(sound):
    with store.open_store(sound) as opened:
        points = [Checkpoint(size, opened.head(size).root) for size in (0, 1, 256, 260, opened.head().size)]
    checks = audit_store(sound, review=REVIEW, checkpoints=points)
    assert [fault for check in checks for fault in check.faults] == []
    assert [check.number for check in checks] == list(range(1, 11))
    assert "2 versions, 1 kept nodes" in checks[5].line()
    assert "5 checkpoints" in checks[9].line()
    assert json.loads(json.dumps([check.to_dict() for check in checks]))[0]["holds"] is True


def test_check_that_was_not_made_says_so(sound):
    assert "not checked: none was given" in audit_store(sound)[9].line()


def test_empty_store_is_sound(target):
    assert [fault for check in audit_store(target) for fault in check.faults] == []


def test_an_audit_cannot_write(sound):
    engine = audit_engine(store_url(sound))
    with pytest.raises(DBAPIError, match=r"readonly|read-only"), engine.begin() as connection:
        connection.exec_driver_sql("INSERT INTO tree_node (level, position, hash) VALUES (9, 9, 'x')")
    engine.dispose()


def test_nothing_is_made_where_no_store_is(tmp_path):
    with pytest.raises(StoreError, match="no evidence store"):
        audit_store(tmp_path / "evidence.db")
    assert list(tmp_path.iterdir()) == []


CELLS = [
    (table.name, column.name)
    for table in METADATA.sorted_tables
    for column in table.columns
    if table.name != "store" or column.name != "review"
] + [("store", "review"), ("alembic_version", "version_num")]


def change(data, value):
    """Return a stored value with one byte changed."""
    if isinstance(value, int):
        return value ^ data.draw(st.integers(1, 255))
    if isinstance(value, float):
        return value * 2 + data.draw(st.integers(1, 9))
    content = bytearray(value if isinstance(value, bytes) else value.encode())
    place = data.draw(st.integers(0, max(len(content) - 1, 0)))
    content[place] = data.draw(st.integers(0, 255).filter(lambda byte: byte != content[place]))
    return bytes(content)


@settings(max_examples=120, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_any_one_changed_byte_in_any_column_is_found_and_its_place_named(original, tmp_path_factory, data):
    table, column = data.draw(st.sampled_from(CELLS))
    place = tmp_path_factory.mktemp("changed") / "evidence.db"
    shutil.copy(original[0], place)
    with closing(sqlite3.connect(place)) as connection:
        rows = connection.execute(
            f'SELECT rowid, "{column}" FROM "{table}" WHERE "{column}" IS NOT NULL AND "{column}" <> \'\''
        ).fetchall()
    if not rows:
        return  # this sort of entry has no such value in this store
    row, value = data.draw(st.sampled_from(rows))
    changed = change(data, value)
    cast = "CAST(? AS TEXT)" if isinstance(value, str) else "?"
    try:
        alter(place, f'UPDATE "{table}" SET "{column}" = {cast} WHERE rowid = {row}', values=(changed,))
    except sqlite3.IntegrityError:
        return  # the database itself knows that the value is taken
    faults = " ".join(fault for texts in failed(place).values() for fault in texts)
    with closing(sqlite3.connect(original[0])) as connection:
        keys = {"entry": row, "store": "store", "tree_node": "node", "alembic_version": "revision"}
        seq = keys.get(table)
        if seq is None:
            ((seq,),) = connection.execute(f'SELECT entry FROM "{table}" WHERE rowid = {row}')
    assert (f"entry {seq} " if isinstance(seq, int) else seq) in faults


@settings(max_examples=60, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_a_changed_byte_of_the_file_is_found_unless_nothing_in_the_store_changed(
    original, tmp_path_factory, data
):
    place = tmp_path_factory.mktemp("flipped") / "evidence.db"
    content = bytearray(original[0].read_bytes())
    at = data.draw(st.integers(0, len(content) - 1))
    content[at] ^= data.draw(st.integers(1, 255))
    place.write_bytes(content)
    if failed(place):
        return
    with store.open_store(place) as one, store.open_store(original[0]) as two:
        assert list(one.entries()) == list(two.entries())
        for kind in EntryKind:
            assert list(one.typed_rows(kind)) == list(two.typed_rows(kind))


@pytest.mark.parametrize(
    ("statement", "check", "words"),
    [
        ("DROP TRIGGER entry_no_update", 1, "trigger entry_no_update is missing"),
        ("CREATE TRIGGER x AFTER INSERT ON entry BEGIN SELECT 1; END", 1, "trigger x is unknown"),
        ("DROP INDEX entry_replaces", 1, "index entry_replaces is missing"),
        ("ALTER TABLE study ADD COLUMN extra", 1, "table study is not as it was laid down"),
        ("DROP TABLE study", 1, "without study"),
        ("UPDATE alembic_version SET version_num = '9999'", 1, "revision 9999"),
        ("UPDATE store SET review = 'another'", 1, "another review"),
        ("UPDATE entry SET seq = 9000 WHERE seq = (SELECT max(seq) FROM entry)", 2, "are missing before it"),
        ("DELETE FROM entry WHERE seq = 9", 2, "entry 9 is missing before it"),
        ("UPDATE entry SET hash = zeroblob(32) WHERE seq = 9", 3, "entry 9 (version 1)"),
        ("UPDATE entry SET canonical = 'text' WHERE seq = 9", 3, "entry 9 (version 1)"),
        ("UPDATE entry SET canonical = 0.5, hash = 7 WHERE seq = 9", 3, "entry 9 (version 1)"),
        ("UPDATE study SET title = 'other' WHERE entry = 0", 5, "study.title"),
        ("DELETE FROM tree_node", 6, "node 0 of level 8"),
        ("INSERT INTO tree_node VALUES (8, 5, zeroblob(32))", 6, "node 5 of level 8 belongs to no entries"),
        ("INSERT INTO result (entry, trial, outcome) VALUES (5000, 'a', 'b')", 7, "entry 5000"),
        ("UPDATE entry SET replaces = 7 WHERE replaces = 0", 7, "one live entry on a key"),
        ("UPDATE entry SET known_at = '2027' WHERE seq = 3", 7, "known before the entry before it"),
        ("UPDATE entry SET key = 'studies/F1' WHERE seq = 7", 7, "its key is not of its kind"),
        ("UPDATE entry SET kind = 'cloud' WHERE seq = 7", 7, "its key is not of its kind"),
        (
            "UPDATE result SET verification = 'verification/T2/failed'",
            7,
            "names a verification that was not there",
        ),
        (
            "UPDATE delivery SET notice = 'notice/9' WHERE rowid = (SELECT max(entry) FROM delivery)",
            7,
            "notice/9",
        ),
        ("UPDATE analysis SET version = 3 WHERE version = 2", 9, "the analysis belongs to no version"),
        ("UPDATE look SET version = NULL WHERE version = 2", 9, "no version"),
        ("UPDATE release SET version = 7 WHERE version = 2", 9, "version 7"),
    ],
)
def test_each_fault_is_told_by_its_check(damaged, statement, check, words):
    if statement.startswith(("DROP", "CREATE", "ALTER")):
        with closing(sqlite3.connect(damaged, isolation_level=None)) as connection:
            connection.execute(statement)
    else:
        alter(damaged, statement)
    faults = failed(damaged)[check]
    assert any(words in fault for fault in faults), faults


def test_a_body_altered_with_its_hash_breaks_the_link_of_the_next_entry(damaged):
    with store.open_store(damaged) as opened:
        (entry,) = opened.entries(since=0, until=1)
    import hashlib

    canonical = entry.canonical.replace(b"Invented", b"Imagined")
    made = (canonical, hashlib.sha256(canonical).digest())
    alter(damaged, "UPDATE entry SET canonical = ?, hash = ? WHERE seq = 0", values=made)
    alter(damaged, "UPDATE study SET title = 'Imagined' WHERE entry = 0")
    found = failed(damaged)
    assert list(found) == [4, 6]
    assert "entry 1 (version 1): it does not follow the entry before it" in found[4][0]
    assert {"version 1", "version 2"} == {fault.split(":")[0] for fault in found[6] if "head" in fault}


def test_reordered_entries_are_found(damaged):
    swap = "UPDATE {} SET {} = CASE {} WHEN -8 THEN 9 WHEN -9 THEN 8 END WHERE {} < 0"
    hide = "UPDATE {} SET {} = -{} WHERE {} IN (8, 9)"
    statements = [
        f.format(*[t, c] + [c] * 2) for t, c in (("entry", "seq"), ("study", "entry")) for f in (hide, swap)
    ]
    alter(damaged, *statements)
    found = failed(damaged)
    assert "entry 8 (version 1): its bytes bear another number" in found[2][0]
    assert "entry 9" in found[2][1]


def cut(place, size):
    tables = [table.name for table in METADATA.sorted_tables if "entry" in table.columns]
    statements = [f'DELETE FROM "{name}" WHERE entry >= {size}' for name in tables]
    alter(place, *statements, f"DELETE FROM entry WHERE seq >= {size}")


def test_a_cut_tail_shows_against_a_head_only(original, damaged):
    head = original[1]
    cut(damaged, head.size - 3)
    assert failed(damaged) == {}
    (fault,) = failed(damaged, checkpoints=[Checkpoint(head.size, head.root, "notice of May")])[10]
    assert "tail was cut" in fault
    assert "notice of May" in fault
    assert f"entries {head.size - 3} to {head.size - 1} from a copy" in fault


def test_a_history_written_anew_shows_against_an_old_head_only(original, tmp_path):
    place, head = original
    forged = tmp_path / "forged.db"
    fill(forged, title="Imagined")  # every hash, link, node and version is right
    assert failed(forged) == {}
    with store.open_store(place) as old:
        points = [Checkpoint(size, old.head(size).root, f"v{size}") for size in (257, head.size)]
    faults = failed(forged, checkpoints=points)[10]
    assert len(faults) == 2
    assert "entries 0 to 256 was rewritten" in faults[0]


def test_a_rewritten_stretch_is_narrowed_down_by_several_heads(original, tmp_path):
    place, head = original
    forged = tmp_path / "forged.db"
    with store.open_store(place) as old, store.create(forged, review=REVIEW) as made:
        points = [Checkpoint(size, old.head(size).root) for size in (100, 200, head.size)]
        for entry in old.entries():
            body = entry.body | ({"title": "Imagined"} if entry.key == "study/F150" else {})
            if entry.kind is EntryKind.VERSION:
                body = {k: v for k, v in body.items() if k not in ("entries", "root")}
            again = NewEntry(
                entry.kind,
                entry.key,
                body,
                entry.true_at,
                entry.by,
                entry.cause,
                entry.reason,
                entry.replaces,
            )
            made.append([again], known_at=entry.known_at)
    faults = failed(forged, checkpoints=points)[10]
    assert [fault.split("something among ")[1].split(" was")[0] for fault in faults] == [
        "entries 100 to 199",
        f"entries 100 to {head.size - 1}",
    ]


def test_many_faults_are_counted_and_the_first_ones_told(damaged):
    alter(damaged, "UPDATE study SET title = 'other'")
    faults = failed(damaged)[5]
    assert len(faults) == 26
    assert faults[-1] == "and 227 more faults of this check."


def test_a_billion_empty_places_take_no_time(damaged):
    alter(damaged, "UPDATE entry SET seq = 1000000000000 WHERE seq = (SELECT max(seq) FROM entry)")
    assert "entry 1000000000000" in failed(damaged)[2][0]


@pytest.mark.parametrize("data", [b"", b"SQLite format 3\x00", b"no database" * 1000])
def test_a_file_that_is_no_store_fails_the_first_check(tmp_path, data):
    path = tmp_path / "evidence.db"
    path.write_bytes(data)
    assert list(failed(path)) == [1]


def test_a_schema_that_is_no_text_fails_the_first_check(damaged):
    content = damaged.read_bytes()
    assert b"CREATE TABLE entry (" in content
    damaged.write_bytes(content.replace(b"CREATE TABLE entry (", b"CREATE TABLE entr\xa7 (", 1))
    assert list(failed(damaged)) == [1]


def test_a_store_of_an_earlier_release_is_left_as_it_is(damaged, monkeypatch):
    alter(damaged, "UPDATE alembic_version SET version_num = '0000'")
    monkeypatch.setattr(audit_schema, "known_revisions", lambda: ["0000", "0001"])
    assert "brings it up to date" in failed(damaged)[1][0]
    with closing(sqlite3.connect(damaged)) as connection:
        assert connection.execute("SELECT version_num FROM alembic_version").fetchall() == [("0000",)]


def test_entries_added_during_an_audit_do_no_harm(damaged, monkeypatch):
    def walk(*arguments):
        with store.open_store(damaged) as opened:
            opened.append(
                [new(EntryKind.STUDY, f"study/N{n}", {"trial": "N"}) for n in range(300)], known_at=LATE
            )
        return original_walk(*arguments)

    from treering.store import audit

    original_walk = audit._walk
    monkeypatch.setattr(audit, "_walk", walk)
    assert failed(damaged) == {}


ROLES = {
    "one person reads and settles": ([{"adjudicator": "CD"}], "CD read trial T1, failed, and in entry 3"),
    "one reader twice": ([{"extractors": ["AB", "AB"]}], "counts one extractor twice"),
    "one reader only": ([{"extractors": ["AB"], "extractions": [1]}], "fewer than two extractors"),
    "extractor as adjudicator": ([{"extractors": ["AB", "EF"]}], "has EF as extractor and adjudicator"),
    "no such reading": ([{"extractions": [1, 77]}], "names an extraction by CD that is not in the store"),
    "another's reading": ([{"extractors": ["AB", "XY"]}], "names an extraction by XY"),
    "one reading short": ([{"extractions": [1]}], "names 1 extractions by 2 extractors"),
    "no adjudication": ([{"adjudication": None}], "names no adjudication"),
    "no such adjudication": ([{"adjudication": 1}], "names an adjudication by EF that is not in the store"),
}


@pytest.mark.parametrize("case", ROLES, ids=str)
def test_broken_role_is_named(evidence, target, case):
    (change,), words = ROLES[case]
    first = new(EntryKind.STUDY, "study/T1", {"trial": "T1"})
    evidence.append([first, *readings(**change)], known_at=EARLY)
    checks = {c.number: c.faults for c in audit_store(target) if not c.holds}
    assert list(checks) == [8]
    assert any(words in fault for fault in checks[8]), checks[8]


def test_roles_free_again_after_a_withdrawal_and_third_readings_are_no_fault(evidence, target):
    read = ABOUT | {"extractor": "EF", "values": VALUES}
    other = {**read, "outcome": "pain", "third_reading": True}
    evidence.append(
        [
            new(EntryKind.STUDY, "study/T1", {"trial": "T1"}),
            *readings(),
            new(EntryKind.EXTRACTION, "extraction/T1/failed/EF", read),
            new(EntryKind.WITHDRAWAL, "extraction/T1/failed/EF", {"reason": "adjudicates"}, replaces=6),
            new(EntryKind.EXTRACTION, "extraction/T1/pain/EF", other),
        ],
        known_at=EARLY,
    )
    assert [fault for check in audit_store(target) for fault in check.faults] == []


@pytest.fixture
def own_postgres(cluster):
    """A filled store on PostgreSQL for one test to damage."""
    place = cluster.fresh()
    fill(place)
    return place


@pytest.mark.parametrize(
    ("statement", "check", "words"),
    [
        (
            "ALTER TABLE entry DISABLE TRIGGER entry_keep_rows",
            1,
            "entry_keep_rows is switched off or changed",
        ),
        ("DROP TRIGGER study_keep_table ON study", 1, "study_keep_table is missing"),
        (
            "CREATE OR REPLACE FUNCTION treering_refuse() RETURNS trigger LANGUAGE plpgsql AS "
            "$$ BEGIN RETURN NEW; END $$",
            1,
            "function that refuses changes",
        ),
        ("ALTER TABLE study ALTER title TYPE text USING title", 1, "column study.title"),
        ("DROP INDEX entry_replaces", 1, "index of table entry"),
        ("UPDATE entry SET canonical = canonical || '\\x20' WHERE seq = 9", 3, "entry 9 (version 1)"),
        ("UPDATE study SET title = 'other' WHERE entry = 0", 5, "study.title"),
        ('UPDATE extraction SET "values" = \'{"a": 1}\' WHERE entry = 1', 5, "extraction.values"),
        ("DELETE FROM tree_node", 6, "node 0 of level 8"),
    ],
)
def test_damage_on_postgresql_is_found(own_postgres, statement, check, words):
    engine = create_engine(own_postgres)
    with engine.begin() as connection:
        connection.exec_driver_sql("SET LOCAL session_replication_role = replica")
        connection.exec_driver_sql(statement)
    engine.dispose()
    faults = failed(own_postgres)[check]
    assert any(words in fault for fault in faults), faults
