"""Compute a version again from stored state and protocol, and compare it with what was released."""

from __future__ import annotations

import json
import tempfile
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from treering import __version__
from treering.report import render
from treering.store import EvidenceStore
from treering.terms import EntryKind
from treering.update.context import Review
from treering.update.versions import analyse_synthesis
from treering.update.views import basis_of, folder_name, version_body, view_from

#: A number that differs by less than this (relative) between code versions is not listed.
SAME_NUMBER = 1e-8


@dataclass(frozen=True)
class Replay:
    """What came of computing one version again.

    Parameters
    ----------
    version : int
        Number of the version.
    code_then, code_now : str
        Code version that laid it down, and the one that computed it again.
    files : tuple of dict
        Per file: name, state ("same bytes", "other bytes", "missing on disk", "not released").
    differences : tuple of dict
        Numbers and words that differ: place, then, now.
    """

    version: int
    code_then: str
    code_now: str
    files: tuple[dict[str, str], ...]
    differences: tuple[dict[str, Any], ...]

    @property
    def holds(self) -> bool:
        """Whether nothing differs."""
        return not self.differences and all(file["state"] == "same bytes" for file in self.files)


def replay(store: EvidenceStore, review: Review, version: int) -> Replay:
    """Compute one version again.

    Parameters
    ----------
    store : EvidenceStore
        The evidence store.
    review : Review
        For the folder of released reports.
    version : int
        Number of the version.

    Returns
    -------
    Replay

    Raises
    ------
    StoreError
        When there is no such version.
    """
    body = version_body(store, version)
    basis = basis_of(store, version)
    again = {o.id: analyse_synthesis(basis, o.id) for o in basis.protocol.outcomes}
    stored = {
        entry.body["synthesis"]: entry.body
        for entry in store.state(version=version).live(EntryKind.ANALYSIS)
        if entry.body["version"] == version
    }
    differences = list(differing(stored, again))
    with tempfile.TemporaryDirectory() as draft:
        digests = render(view_from(store, basis, again), Path(draft))
    files = _compare_files(store, review, body, digests)
    return Replay(version, str(body["code_version"]), __version__, tuple(files), tuple(differences))


def _compare_files(
    store: EvidenceStore, review: Review, body: Mapping[str, Any], digests: Mapping[str, str]
) -> Iterator[dict[str, str]]:
    """Compare what was rendered again with the digests of the release, and these with the files on disk."""
    import hashlib

    release = store.state().get(f"release/{body['version']}")
    folder = review.reports / folder_name(dict(body))
    if release is None:
        yield {"file": folder.name, "state": "not released"}
        return
    for name, digest in sorted(release.body["files"].items()):
        path = folder / name
        if not path.is_file():
            state = "missing on disk"
        elif hashlib.sha256(path.read_bytes()).hexdigest() != digest:
            state = "changed on disk"
        else:
            state = "same bytes" if digests.get(name) == digest else "other bytes"
        yield {"file": f"{folder.name}/{name}", "state": state}


def differing(then: Any, now: Any, place: str = "") -> Iterator[dict[str, Any]]:
    """Yield the places at which two plain values differ, number by number.

    Parameters
    ----------
    then, now : JSON values
        Stored and computed again.
    place : str
        Where in the whole they stand.

    Yields
    ------
    dict
        place, then, now.
    """
    if isinstance(then, Mapping) and isinstance(now, Mapping):
        for name in sorted(set(then) | set(now)):
            yield from differing(then.get(name), now.get(name), f"{place}.{name}" if place else name)
    elif isinstance(then, list) and isinstance(now, list) and len(then) == len(now):
        for i, (a, b) in enumerate(zip(then, now, strict=True)):
            yield from differing(a, b, f"{place}[{i}]")
    elif not _same(then, now):
        yield {"place": place, "then": _short(then), "now": _short(now)}


def _same(then: Any, now: Any) -> bool:
    numbers = all(isinstance(x, int | float) and not isinstance(x, bool) for x in (then, now))
    if numbers:
        return bool(abs(then - now) <= SAME_NUMBER * max(abs(then), abs(now)))
    return bool(then == now)


def _short(value: Any) -> Any:
    if isinstance(value, dict | list):
        text = json.dumps(value)
        return text if len(text) <= 80 else text[:77] + "..."
    return value
