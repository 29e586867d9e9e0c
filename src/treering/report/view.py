"""Everything one version's report shows, as one frozen value built from plain JSON values."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date
from typing import Any

from treering.errors import ReportError
from treering.protocol import Outcome, Protocol
from treering.report.certainty import with_staleness
from treering.report.numbers import canonical

Body = Mapping[str, Any]
VERSION_FIELDS = ("version", "date", "protocol_digest", "code_version")


@dataclass(frozen=True)
class ReportView:
    """What a report is made of; build it with :func:`build_view`.

    Parameters
    ----------
    protocol : Protocol
        The plan in force.
    version : mapping
        Body of the version.
    store_head : mapping
        ``size`` and ``root`` (hex) of the store at this version.
    analyses, previous_analyses : mapping
        Analysis bodies by synthesis id; the second is empty for the base version.
    changes : mapping
        What :func:`treering.changes.compare` returned.
    status : mapping
        Status of the living mode: ``text`` and, where known, ``mode``, ``as_of``, ``next_due``.
    records : mapping
        Lists of entry bodies by name: waiting, waivers, notices, integrity, searches, certainty, ongoing,
        studies, reports, screening, bias, verifications, amendments, defects.
    simulation : mapping or None
        Kept results of ``treering simulate`` by synthesis id, when there are any.
    """

    protocol: Protocol
    version: Body
    store_head: Body
    analyses: Mapping[str, Body]
    previous_analyses: Mapping[str, Body]
    changes: Mapping[str, Body]
    status: Body
    records: Mapping[str, Sequence[Body]] = field(default_factory=dict)
    simulation: Body | None = None

    @property
    def number(self) -> int:
        """Number of the version."""
        return int(self.version["version"])

    @property
    def date(self) -> date:
        """Day of the version."""
        return date.fromisoformat(self.version["date"])

    def outcome(self, synthesis: str) -> Outcome | None:
        """Return the protocol's outcome of a synthesis; None when an amendment dropped it."""
        return self.protocol.outcome(synthesis)

    def listed(self, name: str) -> Sequence[Body]:
        """Return one list of records; empty when there are none."""
        return self.records.get(name, ())


RECORDS = (
    "waiting",
    "waivers",
    "notices",
    "integrity",
    "searches",
    "certainty",
    "ongoing",
    "studies",
    "reports",
    "screening",
    "bias",
    "verifications",
    "amendments",
    "defects",
    "third_readings",
    "agreement_by_field",
    "agreement_by_pair",
)


def build_view(
    *,
    protocol: Protocol,
    version: Body,
    store_head: Body,
    analyses: Mapping[str, Body],
    previous_analyses: Mapping[str, Body] | None,
    changes: Mapping[str, Body],
    status: str | Body,
    simulation: Body | None = None,
    **records: Sequence[Body],
) -> ReportView:
    """Check and freeze the parts of a report.

    Parameters
    ----------
    protocol : Protocol
        The plan in force.
    version : mapping
        Body of the version: version, date, previous, causes, protocol_digest, code_version, entries, root.
    store_head : mapping
        ``size`` and ``root`` of the store the version stands on.
    analyses : mapping
        Analysis body by synthesis id, in the order of the page.
    previous_analyses : mapping or None
        Those of the version before; None for the base version.
    changes : mapping
        What :func:`treering.changes.compare` returned for the two.
    status : str or mapping
        Status line.
    simulation : mapping, optional
        By synthesis id, the ``to_dict`` of a simulation result.
    **records : sequence of mapping
        Bodies of entries, any of :data:`RECORDS`; what is left out is shown as missing. A certainty
        judgement that carries no ``stale`` gets one here.

    Returns
    -------
    ReportView

    Raises
    ------
    ReportError
        When a part is missing, a name is not known, or a number is not finite.
    """
    missing = [name for name in VERSION_FIELDS if version.get(name) is None]
    if missing:
        raise ReportError(
            "the version body lacks fields.", found=", ".join(missing), expected="a value for each"
        )
    number = int(version["version"])
    if unknown := sorted(set(records) - set(RECORDS)):
        raise ReportError(
            "a list of records is not known.", version=number, found=unknown, expected=", ".join(RECORDS)
        )
    if strange := sorted(set(analyses) - {outcome.id for outcome in protocol.outcomes}):
        raise ReportError("a synthesis is not an outcome of the protocol.", version=number, found=strange)
    lists = {name: canonical(list(records.get(name, ())), name) for name in RECORDS}
    lists["certainty"] = with_staleness(
        lists["certainty"],
        analyses,
        day=date.fromisoformat(version["date"]),
        reread_days=protocol.living.certainty_reread_days,
    )
    return ReportView(
        protocol=protocol,
        version=canonical(version, "version"),
        store_head=canonical(store_head, "store_head"),
        analyses={name: canonical(body, name) for name, body in analyses.items()},
        previous_analyses={name: canonical(body, name) for name, body in (previous_analyses or {}).items()},
        changes=canonical(changes, "changes"),
        status={"text": status} if isinstance(status, str) else canonical(status, "status"),
        records=lists,
        simulation=None if simulation is None else canonical(simulation, "simulation"),
    )
