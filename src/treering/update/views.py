"""The view of one version, built from the store alone, so that any version can be rendered again."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from typing import Any

from treering.errors import StoreError
from treering.intake import agreement, settle
from treering.report import ReportView, build_view
from treering.store import EvidenceStore, State, StoredEntry
from treering.terms import EntryKind
from treering.update.versions import Basis, analyses_of, changes_of, stored_protocol

#: Lists of the report and the kind of entry that each prints.
LISTS = {
    "waivers": EntryKind.WAIVER,
    "integrity": EntryKind.INTEGRITY,
    "searches": EntryKind.SEARCH,
    "studies": EntryKind.STUDY,
    "reports": EntryKind.REPORT,
    "screening": EntryKind.SCREENING,
    "bias": EntryKind.RISK_OF_BIAS,
    "verifications": EntryKind.VERIFICATION,
    "amendments": EntryKind.AMENDMENT,
    "defects": EntryKind.DEFECT,
}


def version_body(store: EvidenceStore, version: int) -> dict[str, Any]:
    """Return the body of one version.

    Raises
    ------
    StoreError
        When there is no such version.
    """
    versions = store.versions()
    if not 1 <= version <= len(versions):
        raise StoreError(
            "there is no such version.",
            version=version,
            expected=f"1 to {len(versions)}" if versions else "none yet",
            next_step="`treering history` lists the versions.",
        )
    return versions[version - 1]


def basis_of(store: EvidenceStore, version: int) -> Basis:
    """Return what a stored version was made from: the evidence, without its own looks and analyses."""
    body = version_body(store, version)
    previous = store.versions()[version - 2] if version > 1 else None
    since = -1 if previous is None else int(previous["entries"])
    whole = store.state(version=version)
    evidence = whole.without(lambda entry: _is_of(entry, version))
    return Basis(
        version=version,
        date=str(body["date"]),
        protocol=stored_protocol(whole),
        state=evidence,
        previous={} if previous is None else analyses_of(evidence, int(previous["version"])),
        fresh=tuple(entry for entry in evidence.everything() if entry.seq > since),
        code_versions=(
            None if previous is None else str(previous["code_version"]),
            str(body["code_version"]),
        ),
    )


def _is_of(entry: StoredEntry, version: int) -> bool:
    """Say whether an entry is a look or an analysis of `version` itself, and no evidence for it."""
    return entry.kind in (EntryKind.LOOK, EntryKind.ANALYSIS) and entry.body["version"] == version


def version_view(store: EvidenceStore, version: int) -> ReportView:
    """Build the report of a stored version from the store.

    Parameters
    ----------
    store : EvidenceStore
        The evidence store.
    version : int
        Number of the version, from 1.

    Returns
    -------
    ReportView
    """
    analyses = analyses_of(store.state(version=version), version)
    return view_from(store, basis_of(store, version), analyses)


def view_from(store: EvidenceStore, basis: Basis, analyses: Mapping[str, dict[str, Any]]) -> ReportView:
    """Build the report of a stored version from given analyses (stored ones, or ones computed again)."""
    body = version_body(store, basis.version)
    settled = settle(basis.state, basis.protocol, read_again=_resting(analyses))
    agreed = agreement(basis.state)
    ordered = {o.id: analyses[o.id] for o in basis.protocol.outcomes if o.id in analyses}
    return build_view(
        protocol=basis.protocol,
        version=body,
        store_head={"size": body["entries"], "root": body["root"]},
        analyses=ordered,
        previous_analyses=basis.previous or None,
        changes=changes_of(basis, ordered),
        status=_status(basis),
        waiting=settled.waiting,
        ongoing=_bodies(still_ongoing(basis.state)),
        third_readings=settled.third_readings,
        agreement_by_field=agreed["fields"],
        agreement_by_pair=agreed["pairs"],
        notices=_notices(store, basis.version),
        certainty=rated(basis.state),
        simulation=_simulations(basis.state, ordered),
        **{name: _bodies(basis.state.live(kind)) for name, kind in LISTS.items()},
    )


def _resting(analyses: Mapping[str, dict[str, Any]]) -> list[str]:
    """Return the trials whose removal would undo a crossing: a third person reads them again."""
    blocks = [(body["monitoring"] or {}).get("rests_on") or {} for body in analyses.values()]
    return sorted({trial for block in blocks for group in block.get("sets", ()) for trial in group})


def still_ongoing(state: State) -> list[StoredEntry]:
    """Return the ongoing trials of which no result is verified yet."""
    reported = {entry.body["trial"] for entry in state.live(EntryKind.RESULT)}
    return [entry for entry in state.live(EntryKind.ONGOING) if entry.body["trial"] not in reported]


def _bodies(entries: Sequence[StoredEntry]) -> list[dict[str, Any]]:
    return [{**entry.body, "true_at": entry.true_at, "known_at": entry.known_at} for entry in entries]


def rated(state: State) -> list[dict[str, Any]]:
    """Return the certainty judgements, each bound to the numbers of the version it was made on."""
    return [
        {
            **entry.body,
            "date": entry.body.get("date") or entry.true_at,
            "numbers": entry.body.get("numbers") or _numbers_rated(state, entry.body),
        }
        for entry in state.live(EntryKind.CERTAINTY)
    ]


def _simulations(state: State, analyses: Mapping[str, Any]) -> dict[str, Any] | None:
    """Return the simulations of the plans in force, by synthesis; None when nobody simulated them."""
    found = {}
    for synthesis, body in analyses.items():
        kept = state.get(f"simulation/{synthesis}")
        look = (body["monitoring"] or {}).get("look")
        if kept is not None and look and kept.body["plan_digest"] == look["plan_digest"]:
            found[synthesis] = kept.body
    return found or None


def _numbers_rated(state: State, body: Mapping[str, Any]) -> dict[str, Any]:
    """Return what the raters saw: the numbers of the outcome in the version they name."""
    seen = state.get(f"analysis/{body['outcome']}/{body['version']}")
    if seen is None or not seen.body["pooled"]:
        return {}
    pooled = seen.body["pooled"]
    look = (seen.body["monitoring"] or {}).get("look") or {}
    numbers = {name: pooled[name] for name in ("estimate", "ci_low", "ci_high", "i2")}
    return {**numbers, "k": seen.body["k"], "fraction": look.get("fraction")}


def _notices(store: EvidenceStore, version: int) -> list[dict[str, Any]]:
    """Return the notices laid down with a version, without addresses."""
    return [
        {name: entry.body[name] for name in ("person", "event", "synthesis", "channel", "subject")}
        for entry in store.state().all(EntryKind.NOTICE)
        if entry.body["version"] == version
    ]


def _status(basis: Basis) -> dict[str, Any]:
    searches = [entry.body for entry in basis.state.live(EntryKind.SEARCH) if not entry.body.get("error")]
    last = max((str(body["date"]) for body in searches), default=None)
    searched = f"searched to {last}" if last else "no search run is recorded"
    return {
        "text": f"Living review, {searched}; version {basis.version} of {basis.date}.",
        "mode": "living",
        "as_of": basis.date,
    }


def index_rows(store: EvidenceStore) -> list[dict[str, Any]]:
    """Return one row per version for reports/index.html, oldest first."""
    whole = store.state()
    told = Counter(int(entry.body["version"]) for entry in whole.all(EntryKind.NOTICE))
    return [
        {
            **body,
            "folder": folder_name(body),
            "analyses": analyses_of(whole, int(body["version"])),
            "notices": told[int(body["version"])],
        }
        for body in store.versions()
    ]


def folder_name(version: Mapping[str, Any]) -> str:
    """Return the name of a version's report folder, DATE-vNNN."""
    return f"{version['date']}-v{int(version['version']):03d}"
