"""Checking an export without the store it comes from, and making a store of it with the same heads."""

from __future__ import annotations

import json
import tempfile
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from hashlib import sha256
from pathlib import Path
from typing import Any

from treering.errors import LedgerError, ProofError, StoreError
from treering.store import opening
from treering.store.canonical import parse_canonical
from treering.store.chain import ChainRow, check_links
from treering.store.connection import place_of, store_url
from treering.store.entries import Head, StoredEntry, row_of, stored
from treering.store.exporting import ENTRIES, FORMAT, PACKAGE, file_digest, write_tables
from treering.store.merkle import Frontier, leaf_hash
from treering.store.proofs import read_document, verify_consistency, verify_inclusion
from treering.store.repo import EvidenceStore

_STEP = "Export again from the store; if that is lost, take another copy of the export."


@dataclass(frozen=True, slots=True)
class Package:
    """An export that holds.

    Parameters
    ----------
    review : str
        Name of the review.
    version : int or None
        Version it was made of; None for everything.
    head : Head
        Size and root; to be compared with one that is trusted.
    """

    review: str
    version: int | None
    head: Head


def verify_export(folder: Path) -> Package:
    """Check an export: files, chain, tree, tables and proofs; without any database.

    Parameters
    ----------
    folder : Path
        As :func:`treering.store.exporting.export` makes it.

    Returns
    -------
    Package
        What it holds.

    Raises
    ------
    ProofError
        When it is no export, or anything in it differs from what the entries say.
    """
    package, files = _read_package(folder)
    for path, digest in files.items():
        if not (folder / path).is_file() or f"sha256:{file_digest(folder / path)[0]}" != digest:
            raise _broken(f"file {path} is missing or not as it was written", folder, expected=digest)
    head = _head_of(folder)
    if head != package.head:
        raise _broken(
            "the entries do not give the head",
            folder,
            found=f"{head.size} {head.root}",
            expected=f"{package.head.size} {package.head.root}",
        )
    _check_tables(folder, files)
    _check_proofs(folder, package)
    return package


def import_export(folder: Path, target: str | Path) -> Package:
    """Make a store of an export, with the same entries, dates, hashes and heads.

    Parameters
    ----------
    folder : Path
        The export; it is checked first.
    target : str or Path
        Where there is no store yet, or an empty one of the same review.

    Returns
    -------
    Package
        What was laid down.

    Raises
    ------
    ProofError
        When the export does not hold; nothing is made then.
    StoreError
        When the store is not empty or cannot be made.
    """
    package = verify_export(folder)
    url = store_url(target)
    file = Path(str(url.database)) if url.get_backend_name() == "sqlite" else None
    fresh = file is not None and not file.exists()
    with _empty_store(target, package.review) as store:
        try:
            store.restore(_lines(folder))
        except BaseException:
            store.close()
            if (
                fresh and file is not None
            ):  # an empty store left behind would stand in the way of the next try
                for name in (file.name, f"{file.name}-wal", f"{file.name}-shm"):
                    file.with_name(name).unlink(missing_ok=True)
            raise
        head = store.head()
    if head != package.head:
        raise _broken("the store made of it has another head", folder, found=head, expected=package.head)
    return package


def _empty_store(target: str | Path, review: str) -> EvidenceStore:
    try:
        store = opening.create(target, review=review)
    except StoreError:
        store = opening.open_store(target)
    if store.head().size or store.review != review:
        found = f"{store.head().size} entries of {store.review}"
        store.close()
        raise StoreError(
            "An export can be imported into an empty store of the same review only.",
            file=place_of(store_url(target)),
            found=found,
            expected=f"no entries of {review}",
            next_step="Name a place where no store is yet.",
        )
    return store


def _read_package(folder: Path) -> tuple[Package, dict[str, str]]:
    try:
        value = json.loads((folder / PACKAGE).read_bytes())
        about = value["treering"]
        if about["format"] != FORMAT:
            raise ValueError(f"format {about['format']}")
        head = Head(int(about["size"]), str(about["root"]))
        files = {str(item["path"]): str(item["hash"]) for item in value["resources"]}
        version = None if about["version"] is None else int(about["version"])
        if ENTRIES not in files or any(Path(p).is_absolute() or ".." in Path(p).parts for p in files):
            raise ValueError("the list of files")
        return Package(str(about["review"]), version, head), files
    except (OSError, ValueError, KeyError, TypeError, AttributeError) as error:
        raise ProofError(
            "This folder is no export of an evidence store.",
            file=str(folder),
            found=f"{type(error).__name__}: {error}",
            expected=f"a {PACKAGE} written by treering store export",
            next_step=_STEP,
        ) from error


def _lines(folder: Path) -> Iterator[bytes]:
    with (folder / ENTRIES).open("rb") as file:
        for line in file:
            yield line.removesuffix(b"\n")


def _head_of(folder: Path) -> Head:
    """Return the head that the entries give, after checking numbers and links."""
    tree = Frontier()

    def rows() -> Iterator[ChainRow]:
        for seq, canonical in enumerate(_lines(folder)):
            tree.add(leaf_hash(canonical))
            yield seq, canonical, sha256(canonical).digest()

    try:
        check_links(rows())
    except LedgerError as error:
        raise _broken(str(error), folder) from error
    return Head(tree.size, tree.root().hex())


def _entries(folder: Path) -> Iterator[StoredEntry]:
    for seq, canonical in enumerate(_lines(folder)):
        try:
            yield stored(row_of(parse_canonical(canonical), canonical, sha256(canonical).digest()))
        except (StoreError, ValueError, KeyError, TypeError) as error:
            raise _broken(f"entry {seq} cannot be read", folder, found=canonical[:80]) from error


def _check_tables(folder: Path, files: Mapping[str, str]) -> None:
    """Write the tables again from the entries and compare the bytes."""
    with tempfile.TemporaryDirectory() as name:
        again = Path(name)
        replaced = {entry.replaces for entry in _entries(folder) if entry.replaces is not None}
        tables = write_tables(_entries(folder), again, replaced)
        made = {f"tables/{table}.csv" for table in tables}
        given = {path for path in files if path.startswith("tables/")}
        for path in sorted(made | given):
            same = path in made and path in given and files[path] == f"sha256:{file_digest(again / path)[0]}"
            if not same:
                raise _broken(f"file {path} does not say what the entries say", folder)


def _check_proofs(folder: Path, package: Package) -> None:
    """Check every proof, and that it leads to the head of the export."""
    for name in ("consistency", "inclusion"):
        for number, line in enumerate((folder / "proofs" / f"{name}.jsonl").read_bytes().splitlines(), 1):
            document = read_document(line)
            head = (
                verify_consistency(document).second
                if name == "consistency"
                else verify_inclusion(document).head
            )
            if head != package.head:
                raise _broken(f"line {number} of proofs/{name}.jsonl leads to another head", folder)


def _broken(text: str, folder: Path, *, found: Any = None, expected: Any = None) -> ProofError:
    return ProofError(
        f"The export does not hold: {text}.",
        file=str(folder),
        found=found,
        expected=expected,
        next_step=_STEP,
    )
