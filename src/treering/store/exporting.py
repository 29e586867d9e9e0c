"""Export of a store as a folder that others can read: CSV files, a data dictionary, the ledger and proofs.

The folder is a Data Package (Frictionless Data, specs.frictionlessdata.io): ``datapackage.json`` lists the
files with their digests and gives each column its type and meaning. ``entries.jsonl`` holds the canonical
bytes of the entries, one a line; it is the evidence, from which the same store can be made again, and the
CSV files repeat it for people and for other programs.

::

    datapackage.json              the list of files, the data dictionary, review, version and head
    dictionary.csv                the data dictionary once more, as a table
    entries.jsonl                 canonical bytes, line seq + 1 for entry seq
    tables/KIND.csv               one file for each kind of entry that occurs
    proofs/consistency.jsonl      for each version: its head is extended by that of this export
    proofs/inclusion.jsonl        for each live result and analysis: it is in the head of this export
"""

from __future__ import annotations

import csv
import json
import os
import re
import shutil
from collections.abc import Iterable, Iterator, Mapping
from contextlib import ExitStack
from dataclasses import dataclass
from hashlib import sha256
from pathlib import Path
from typing import Any

from treering.errors import StoreError
from treering.store.canonical import canonical_bytes
from treering.store.connection import explained
from treering.store.dictionary import envelope_names, schema_of, table_name
from treering.store.entries import Head, StoredEntry
from treering.store.projection import BODY_FIELDS
from treering.store.proofs import consistency_document, inclusion_documents
from treering.store.reads import StoreReader
from treering.terms import EntryKind

FORMAT = 1
ENTRIES = "entries.jsonl"
PACKAGE = "datapackage.json"
_PROVED = (EntryKind.RESULT, EntryKind.ANALYSIS)
_ABOUT = (
    "Evidence store of a living systematic review, exported by treering. Each row is one entry of an "
    "append-only ledger; entries.jsonl holds the bytes that are hashed. Notices hold addresses of people: "
    "think before handing the folder on."
)


@dataclass(frozen=True, slots=True)
class Exported:
    """What was exported.

    Parameters
    ----------
    folder : Path
        Where.
    head : Head
        Size and root of the tree over the entries in it.
    tables : dict of str to int
        Name of each table to its rows.
    """

    folder: Path
    head: Head
    tables: dict[str, int]


def export(store: StoreReader, folder: Path, *, version: int | None = None) -> Exported:
    """Write a store, or what one version saw, into a new folder.

    Parameters
    ----------
    store : StoreReader
        The evidence store.
    folder : Path
        Folder to make; it appears only when it is complete.
    version : int, optional
        The entries that this version states as its head; everything by default.

    Returns
    -------
    Exported
        Head and number of rows.

    Raises
    ------
    StoreError
        When there is something at the place, or no such version.
    """
    versions = store.versions()
    if version is not None and not 1 <= version <= len(versions):
        raise StoreError(
            "There is no such version.", version=version, next_step="See treering history for the versions."
        )
    head = store.head(None if version is None else int(versions[version - 1]["entries"]))
    draft = _draft(folder)
    try:
        replaced = {e.replaces for e in store.entries(until=head.size) if e.replaces is not None}
        counts = write_tables(store.entries(until=head.size), draft, replaced)
        _write_proofs(store, draft, head, versions, replaced)
        about = {"review": store.review, "version": version, "size": head.size, "root": head.root}
        write_package(draft, about, list(counts))
        draft.rename(folder)
    except OSError as error:
        shutil.rmtree(draft, ignore_errors=True)
        raise explained(str(error), type(error).__name__, "export") from error
    except BaseException:
        shutil.rmtree(draft, ignore_errors=True)
        raise
    return Exported(folder, head, counts)


def _draft(folder: Path) -> Path:
    if folder.exists():
        raise StoreError(
            "There is something at the place of the export.",
            file=str(folder),
            next_step="Choose another name; an export never overwrites anything.",
        )
    draft = folder.with_name(f".{folder.name}.draft")
    try:
        shutil.rmtree(draft, ignore_errors=True)
        draft.mkdir(parents=True)
    except OSError as error:
        raise explained(str(error), "readonly", "export") from error
    return draft


def write_tables(entries: Iterable[StoredEntry], folder: Path, replaced: set[int]) -> dict[str, int]:
    """Write the ledger and one CSV file for each kind, an entry at a time.

    Parameters
    ----------
    entries : iterable of StoredEntry
        In order.
    folder : Path
        Folder to write to.
    replaced : set of int
        Entries that a later one replaces or withdraws.

    Returns
    -------
    dict of str to int
        Name of each table written to its rows.
    """
    counts: dict[str, int] = {}
    writers: dict[EntryKind, Any] = {}
    (folder / "tables").mkdir()
    with ExitStack() as stack:
        ledger = stack.enter_context((folder / ENTRIES).open("wb"))
        for entry in entries:
            name = table_name(entry.kind)
            if entry.kind not in writers:
                path = folder / "tables" / f"{name}.csv"
                file = stack.enter_context(path.open("w", encoding="utf-8", newline=""))
                writers[entry.kind] = csv.writer(file)
                writers[entry.kind].writerow(column["name"] for column in schema_of(entry.kind)["fields"])
            ledger.write(entry.canonical + b"\n")
            writers[entry.kind].writerow(_cells(entry, entry.seq not in replaced))
            counts[name] = counts.get(name, 0) + 1
    return dict(sorted(counts.items()))


def _cells(entry: StoredEntry, current: bool) -> Iterator[str]:
    """Yield the cells of one row; an empty one says that nothing is known."""
    live = current and entry.kind != EntryKind.WITHDRAWAL
    for name in envelope_names(entry.kind):
        yield _cell(live if name == "live" else getattr(entry, name))
    fields = BODY_FIELDS[entry.kind]
    for name in fields:
        yield _cell(entry.body.get(name))
    yield _cell({name: value for name, value in entry.body.items() if name not in fields} or None)


def _cell(value: Any) -> str:
    if value is None:
        return ""
    if isinstance(value, str):
        return value
    return canonical_bytes(value).decode()


def _write_proofs(
    store: StoreReader, folder: Path, head: Head, versions: Iterable[Mapping[str, Any]], replaced: set[int]
) -> None:
    (folder / "proofs").mkdir()
    sizes = [int(body["entries"]) for body in versions]
    extends = (consistency_document(store, size, head.size) for size in sizes if 0 < size <= head.size)
    _write_lines(folder / "proofs" / "consistency.jsonl", extends)
    proved = (e.seq for e in store.entries(until=head.size) if e.kind in _PROVED and e.seq not in replaced)
    _write_lines(folder / "proofs" / "inclusion.jsonl", inclusion_documents(store, proved, head.size))


def _write_lines(path: Path, documents: Iterable[Mapping[str, Any]]) -> None:
    with path.open("wb") as file:
        for document in documents:
            file.write(canonical_bytes(document) + b"\n")


def write_package(folder: Path, about: Mapping[str, Any], tables: Iterable[str]) -> None:
    """Write the data dictionary and the list of files.

    Parameters
    ----------
    folder : Path
        Folder with the other files.
    about : mapping
        review, version, size and root.
    tables : iterable of str
        Names of the tables written.
    """
    kinds = {table_name(kind): kind for kind in EntryKind}
    schemas = {name: schema_of(kinds[name]) for name in tables}
    with (folder / "dictionary.csv").open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(("table", "column", "type", "meaning"))
        for name, schema in schemas.items():
            writer.writerows((name, f["name"], f["type"], f["description"]) for f in schema["fields"])
    resources = [
        _resource(folder, f"tables/{name}.csv", name, "csv", schema=schema, title=str(kinds[name]))
        for name, schema in schemas.items()
    ]
    resources.append(_resource(folder, "dictionary.csv", "dictionary", "csv", schema=_DICTIONARY))
    for path in (ENTRIES, "proofs/consistency.jsonl", "proofs/inclusion.jsonl"):
        resources.append(_resource(folder, path, Path(path).stem, "jsonl"))
    package = {
        "profile": "data-package",
        "name": re.sub(r"[^a-z0-9._-]+", "-", str(about["review"]).lower()).strip("-") or "review",
        "title": f"Evidence store of {about['review']}",
        "description": _ABOUT,
        "treering": {"format": FORMAT, **about},
        "resources": resources,
    }
    with (folder / PACKAGE).open("w", encoding="utf-8") as file:
        file.write(json.dumps(package, indent=2, ensure_ascii=False) + "\n")
        file.flush()
        os.fsync(file.fileno())


_DICTIONARY = {
    "fields": [
        {"name": "table", "type": "string", "description": "Name of the table."},
        {"name": "column", "type": "string", "description": "Name of the column."},
        {"name": "type", "type": "string", "description": "Type of its cells, in the words of Table Schema."},
        {"name": "meaning", "type": "string", "description": "What it holds."},
    ]
}


def _resource(folder: Path, path: str, name: str, form: str, **more: Any) -> dict[str, Any]:
    """Return what the package says of one file."""
    digest, size = file_digest(folder / path)
    return {
        "profile": "tabular-data-resource" if "schema" in more else "data-resource",
        "type": "table" if "schema" in more else "file",
        "name": name.replace("_", "-"),
        "path": path,
        "format": form,
        "mediatype": "text/csv" if form == "csv" else "application/jsonl",
        "encoding": "utf-8",
        "bytes": size,
        "hash": f"sha256:{digest}",
        **more,
    }


def file_digest(path: Path) -> tuple[str, int]:
    """Return SHA-256 and size of a file.

    Parameters
    ----------
    path : Path
        The file.

    Returns
    -------
    tuple of (str, int)
        Hexadecimal digest, and bytes.
    """
    digest, size = sha256(), 0
    with path.open("rb") as file:
        while block := file.read(1 << 20):
            digest.update(block)
            size += len(block)
    return digest.hexdigest(), size
