"""Every error that leaves treering, in one tree.

::

    TreeringError
    ├── ProtocolError          config/review.toml or config/panel.toml cannot be used
    │   └── AmendmentError     the plan changed and no amendment says so
    ├── IntakeError            a file in intake/ cannot be taken in
    ├── AnalysisError          numbers that cannot be analysed
    │   └── NotConvergedError  an iteration ended without an answer
    ├── StoreError             the evidence store refused or is damaged
    │   ├── StoreBusyError     another update holds the writer's lock
    │   ├── NoStoreError       there is no evidence store at that place
    │   ├── CanonicalError     a value has no canonical bytes
    │   ├── LedgerError        an entry breaks a rule of the ledger; one class for each rule
    │   │   ├── EntryGapError     a sequence number is missing or out of order
    │   │   ├── BrokenLinkError   an entry does not name the hash of the one before
    │   │   ├── EntryHashError    bytes and hash of an entry differ
    │   │   ├── ReplacementError  a live key is taken, or what is replaced is not live
    │   │   ├── KnownDateError    an entry is known earlier than the one before
    │   │   ├── VersionGapError   a version's number does not follow the last one's
    │   │   └── TreeHeadError     size or root of the Merkle tree differ from what is stated
    │   ├── AuditError         a numbered check of the audit failed
    │   └── ProofError         a proof, a signature or an export does not hold
    ├── ReportError            a version cannot be rendered
    └── NoticeError            a notice could not be delivered

Each carries what it concerns and what to do next; none is raised for a programming mistake.
"""

from __future__ import annotations


class TreeringError(Exception):
    """Base of all errors of this package.

    Parameters
    ----------
    message : str
        What is wrong, in one sentence.
    trial, file, version : str or int, optional
        What it concerns.
    found, expected : object, optional
        The value met and the value or range that would have been right.
    next_step : str, optional
        What the reader should do.
    """

    def __init__(
        self,
        message: str,
        *,
        trial: str | None = None,
        file: str | None = None,
        version: int | None = None,
        found: object = None,
        expected: object = None,
        next_step: str | None = None,
    ) -> None:
        super().__init__(message)
        self.message = message
        self.trial = trial
        self.file = file
        self.version = version
        self.found = found
        self.expected = expected
        self.next_step = next_step

    def __str__(self) -> str:
        """Return the whole message: place, fault, found and expected, next step."""
        places = [
            f"{name} {value}"
            for name, value in (("file", self.file), ("trial", self.trial), ("version", self.version))
            if value is not None
        ]
        text = f"{', '.join(places)}: {self.message}" if places else self.message
        if self.found is not None:
            text += f" Found: {self.found}."
        if self.expected is not None:
            text += f" Expected: {self.expected}."
        if self.next_step:
            text += f" {self.next_step}"
        return text


class ProtocolError(TreeringError):
    """config/review.toml or config/panel.toml cannot be used."""


class AmendmentError(ProtocolError):
    """The plan changed and no amendment says so."""


class IntakeError(TreeringError):
    """A file in the intake folder cannot be taken in."""


class AnalysisError(TreeringError):
    """Numbers that cannot be analysed."""


class NotConvergedError(AnalysisError):
    """An iteration ended without an answer."""


class StoreError(TreeringError):
    """The evidence store refused an operation or is damaged."""


class StoreBusyError(StoreError):
    """Another update holds the writer's lock."""


class CanonicalError(StoreError):
    """A value has no canonical bytes."""


class LedgerError(StoreError):
    """An entry breaks a rule of the ledger."""


class EntryGapError(LedgerError):
    """A sequence number is missing or out of order."""


class BrokenLinkError(LedgerError):
    """An entry does not name the hash of the one before."""


class EntryHashError(LedgerError):
    """Bytes and hash of an entry differ."""


class ReplacementError(LedgerError):
    """A live key is taken, or what is replaced is not live."""


class KnownDateError(LedgerError):
    """An entry is known earlier than the one before."""


class VersionGapError(LedgerError):
    """A version's number does not follow the last one's."""


class TreeHeadError(LedgerError):
    """Size or root of the Merkle tree differ from what is stated."""


class NoStoreError(StoreError):
    """There is no evidence store at that place."""


class AuditError(StoreError):
    """A numbered check of the audit failed."""


class ProofError(StoreError):
    """A proof, a signature or an export does not hold or cannot be read."""


class ReportError(TreeringError):
    """A version cannot be rendered."""


class NoticeError(TreeringError):
    """A notice could not be delivered."""
