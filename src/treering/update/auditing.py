"""The audit of a review: its store, and its released pages against the digests in the store."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from treering.errors import AuditError, StoreError
from treering.store import StoredEntry
from treering.store.audit import audit_store
from treering.store.checkpoint import Checkpoint, checkpoint_of_report, parse_checkpoint
from treering.store.checks import COMPARE, Check, Findings
from treering.store.opening import open_store
from treering.terms import EntryKind
from treering.update.context import Review, read_review
from treering.update.views import folder_name

_REPORT = "report.json"
_FOLDERS = "[0-9]*-v[0-9]*"  # not the draft that an update which died left behind: it begins with a dot
_RENDER = "Run treering replay on the version: it makes the page again; keep what is there for the inquiry."
_STRAY = "Find out who put it there; a released version is never added to."


def audit_review(folder: Path, *, checkpoint: str | None = None, report: Path | None = None) -> list[Check]:
    """Check the evidence store of a review and its released pages; nothing is made or changed.

    The heads stated by the report.json files on disk are used as checkpoints too: whoever writes the history
    of the store anew would have to write every page anew as well.

    Parameters
    ----------
    folder : Path
        The review folder.
    checkpoint : str, optional
        A head as printed in a report or notice, "SIZE ROOT".
    report : Path, optional
        An old report.json, from anywhere, to take a head from.

    Returns
    -------
    list of Check
        Checks 1 to 11 in order; only check 1 when the store cannot be read at all.

    Raises
    ------
    ProtocolError
        When the config cannot be read.
    StoreError
        When there is no store.
    AuditError
        When the checkpoint or the report given cannot be read.
    """
    review = read_review(folder)
    points = [parse_checkpoint(checkpoint)] if checkpoint else []
    points += [checkpoint_of_report(report)] if report else []
    points += _heads_on_disk(review)
    checks = audit_store(review.store_place, review=review.protocol.review.id, checkpoints=points)
    if all(check.holds for check in checks if check.number == 1):
        checks.append(_check_pages(review))
    return checks


def _heads_on_disk(review: Review) -> list[Checkpoint]:
    points = []
    for path in sorted(review.reports.glob(f"{_FOLDERS}/{_REPORT}")):
        try:
            point = checkpoint_of_report(path)
        except AuditError:
            continue  # a report that cannot be read has not the bytes that were released: check 11 says so
        points.append(Checkpoint(point.size, point.root, str(path.relative_to(review.folder))))
    return points


def _check_pages(review: Review) -> Check:
    """Hold every file of every released version against its digest (check 11)."""
    findings = Findings()
    findings.seen[11] = "not checked"
    versions: dict[int, Mapping[str, Any]] = {}
    releases: dict[int, StoredEntry] = {}
    try:
        # Check 1 found the tables up to date, so that opening the store migrates nothing.
        with open_store(review.store_place, upgrade=False) as store:
            versions = {int(body["version"]): body for body in store.versions()}
            releases = {int(e.body["version"]): e for e in store.state().live(EntryKind.RELEASE)}
    except (StoreError, ValueError, KeyError, TypeError) as error:
        # The entries are damaged; the other checks name the place.
        findings.add(11, f"The releases cannot be read from the store: {error}", step=COMPARE)
    else:
        findings.seen[11] = f"{_check_released(review, versions, releases, findings)} files"
        _check_strays(review, versions, releases, findings)
    (check,) = findings.checks([(int(body["entries"]), number) for number, body in versions.items()])
    return check


def _check_released(
    review: Review,
    versions: Mapping[int, Mapping[str, Any]],
    releases: Mapping[int, StoredEntry],
    findings: Findings,
) -> int:
    """Check the files of each release and return how many there are."""
    count = 0
    for number, release in sorted(releases.items()):
        if number not in versions:
            continue  # told by check 9
        files = release.body["files"]
        count += len(files)
        for text, found, step in _page_faults(review.reports / folder_name(versions[number]), files):
            findings.add(11, text, seq=release.seq, version=number, found=found, step=step)
    return count


def _check_strays(
    review: Review,
    versions: Mapping[int, Mapping[str, Any]],
    releases: Mapping[int, StoredEntry],
    findings: Findings,
) -> None:
    """Check that every folder that bears the name of a version is one that was released."""
    known = {folder_name(body): number for number, body in versions.items()}
    for path in sorted(review.reports.glob(_FOLDERS)):
        number = known.get(path.name)
        if number in releases:
            continue
        text, step = (
            "the store knows no such version",
            "Its tail was cut, or the folder is no page of this review.",
        )
        if number is not None:
            text, step = "its version has no release yet", "Run treering update: it finishes the release."
        findings.add(11, f"folder {path.name}: {text}.", step=step)


def _page_faults(folder: Path, files: Mapping[str, str]) -> Iterator[tuple[str, Any, str]]:
    """Yield what is missing, changed or unknown in the folder of one version."""
    for name, digest in sorted(files.items()):
        path = folder / name
        if not path.is_file():
            yield f"file {folder.name}/{name} is missing.", None, _RENDER
            continue
        found = hashlib.sha256(path.read_bytes()).hexdigest()
        if found != digest:
            yield f"file {folder.name}/{name} is not as it was released.", found, _RENDER
    for path in sorted(folder.rglob("*")):
        name = path.relative_to(folder).as_posix()
        if not path.is_dir() and name not in files:
            yield f"file {folder.name}/{name} was not released.", None, _STRAY
