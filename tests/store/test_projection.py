"""The typed rows can be rebuilt from the canonical bytes alone, whatever the body."""

from __future__ import annotations

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from treering.records import NewEntry
from treering.store.canonical import canonical_bytes, parse
from treering.store.entries import row_of
from treering.store.models import METADATA, TABLES
from treering.store.projection import BODY_FIELDS, project, typed_values
from treering.terms import EntryKind

TEXT = st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\x00"), max_size=8)
NUMBERS = st.integers(-(2**53) + 1, 2**53 - 1) | st.floats(allow_nan=False, allow_infinity=False)
JSON = st.recursive(
    NUMBERS | TEXT | st.booleans(),
    lambda inner: (
        st.lists(inner | st.none(), max_size=3) | st.dictionaries(TEXT, inner | st.none(), max_size=3)
    ),
    max_leaves=6,
)
WHOLE = st.integers(-(2**53) + 1, 2**53 - 1)
BY_TYPE = {"VARCHAR": TEXT, "JSON": JSON, "BOOLEAN": st.booleans(), "FLOAT": NUMBERS, "BIGINT": WHOLE}


def bodies(kind):
    columns = [
        column for column in METADATA.tables[TABLES[kind].__tablename__].columns if column.name != "entry"
    ]
    values = {}
    for column in columns:
        fitting = BY_TYPE[str(column.type)]
        values[column.name] = st.none() | fitting if column.nullable else fitting
    return st.fixed_dictionaries(values, optional={"something_else": JSON})


ENTRIES = st.sampled_from(EntryKind).flatmap(lambda kind: st.tuples(st.just(kind), bodies(kind)))


@given(ENTRIES)
def test_row_from_the_bytes_is_the_row_from_the_body(kind_and_body):
    kind, body = kind_and_body
    read = parse(canonical_bytes(body))
    assert typed_values(kind, 3, read, key="k") == typed_values(kind, 3, body, key="k")
    assert len(project(kind, 3, body, key="k")) == 1 + len(BODY_FIELDS[kind])


@settings(max_examples=40, suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None)
@given(st.lists(ENTRIES.filter(lambda pair: pair[0] not in KEPT_APART), min_size=1, max_size=5))
def test_what_is_read_back_is_what_the_bytes_ask_for(evidence, moment, pairs):
    prefix = evidence.head().size
    entries = [
        NewEntry(kind, f"{KEYS[kind]}{prefix + place}", body, "2026-05-01")
        for place, (kind, body) in enumerate(pairs)
    ]
    laid = evidence.append(entries, known_at=moment)
    for entry in laid:
        (row,) = evidence.typed_rows(entry.kind, since=entry.seq, until=entry.seq + 1)
        assert row == typed_values(entry.kind, entry.seq, entry.body, key=entry.key)
    rows = [row_of(parse(entry.canonical), entry.canonical, b"") for entry in laid]
    assert [(row[0], row[1], row[2], row[5]) for row in rows] == [
        (entry.seq, entry.kind, entry.key, entry.by) for entry in laid
    ]


# A version must state the head, a withdrawal a live key: their own tests are in test_append.py.
KEPT_APART = {EntryKind.VERSION, EntryKind.WITHDRAWAL}
KEYS = {
    kind: {
        EntryKind.OUTCOME: "outcome/",
        EntryKind.RISK_OF_BIAS: "bias/",
        EntryKind.CERTAINTY: "certainty/",
        EntryKind.INTEGRITY: "integrity/",
        EntryKind.SEARCH: "search/",
        EntryKind.SCREENING: "screening/",
        EntryKind.ONGOING: "ongoing/",
        EntryKind.PANEL_DECISION: "decision/",
    }.get(kind, f"{kind}/")
    for kind in EntryKind
}
