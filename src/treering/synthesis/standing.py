"""What synthesis reads of the store, and what published notices do to a trial."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Protocol

from treering.terms import EntryKind, NoticeKind


class Entry(Protocol):
    """What synthesis reads of a stored entry."""

    @property
    def key(self) -> str:
        """Key of the entry."""
        ...

    @property
    def body(self) -> Mapping[str, Any]:
        """Content of the entry."""
        ...

    @property
    def true_at(self) -> str:
        """ISO date at which it was true."""
        ...

    @property
    def known_at(self) -> str:
        """ISO date-time at which the team knew it."""
        ...


class StateView(Protocol):
    """What synthesis reads of the state of the evidence store."""

    def live(self, kind: EntryKind) -> Sequence[Entry]:
        """Return the live entries of one kind, ordered by key."""
        ...

    def get(self, key: str) -> Entry | None:
        """Return the live entry with this key, or None."""
        ...


@dataclass(frozen=True)
class Standing:
    """How a trial stands after the notices published about it.

    Parameters
    ----------
    status : str
        "included", "retracted" or "on hold"; "no usable result" where the result itself says so.
    left_out : str or None
        Why it is not in the main analysis.
    flags : tuple of str
        Each notice with its date.
    held_since : str or None
        ISO date of the expression of concern that holds it.
    """

    status: str = "included"
    left_out: str | None = None
    flags: tuple[str, ...] = ()
    held_since: str | None = None


def standing_of(state: StateView, trial: str, concern: str) -> Standing:
    """Say what the published notices about a trial do to it.

    Parameters
    ----------
    state : StateView
        The evidence.
    trial : str
        Its id.
    concern : str
        The protocol's rule for an expression of concern: "keep and flag" or "hold".

    Returns
    -------
    Standing
    """
    notices = sorted(
        (entry for entry in state.live(EntryKind.INTEGRITY) if entry.body["trial"] == trial),
        key=lambda entry: (entry.true_at, entry.key),
    )
    standing = Standing()
    for entry in notices:
        standing = _after(standing, NoticeKind(entry.body["notice"]), entry.true_at, concern)
    return standing


def _after(before: Standing, notice: NoticeKind, day: str, concern: str) -> Standing:
    flags = (*before.flags, f"{notice.value}, {day}")
    if notice is NoticeKind.RETRACTION:
        return Standing("retracted", f"report retracted on {day}", flags)
    if notice is NoticeKind.REINSTATEMENT:
        return Standing(flags=flags)
    held = notice is NoticeKind.EXPRESSION_OF_CONCERN and concern == "hold" and before.status == "included"
    if held:
        return Standing("on hold", f"expression of concern on {day}: on hold by protocol", flags, day)
    return Standing(before.status, before.left_out, flags, before.held_since)
