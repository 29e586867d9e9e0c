"""Checking whatever left the house: proofs, exports, signed statements; none of it needs the store."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

from treering.errors import ProofError
from treering.store.checkpoint import Checkpoint
from treering.store.entries import Head
from treering.store.importing import verify_export
from treering.store.keys import key_id
from treering.store.keys import public_key as read_public_key
from treering.store.proofs import (
    CONSISTENCY,
    read_document,
    verify_consistency,
    verify_inclusion,
)
from treering.store.signing import ORIGIN, verify_statement


def verify_path(
    path: Path, *, heads: Sequence[Checkpoint] = (), public_key: Path | None = None
) -> dict[str, Any]:
    """Check a file or folder, whichever of the three it is.

    Parameters
    ----------
    path : Path
        Proof, signed statement, or folder of an export.
    heads : sequence of Checkpoint, optional
        Heads from trusted sources; what is checked must lead to each of them.
    public_key : Path, optional
        The signer's public key, for a signed statement.

    Returns
    -------
    dict
        What it shows, by plain words.

    Raises
    ------
    ProofError
        When it does not hold, does not lead to a head given, or cannot be read.
    """
    if path.is_dir():
        package = verify_export(path)
        about = {"holds": "export", "review": package.review, "version": package.version}
        return about | _led_to([package.head], heads)
    try:
        data = path.read_bytes()
    except OSError as error:
        raise ProofError(
            "The file cannot be read.",
            file=str(path),
            found=error.strerror,
            next_step="Name a proof, a signed statement or the folder of an export.",
        ) from error
    if data.startswith(ORIGIN.encode() + b"\n") or data.startswith(ORIGIN.encode() + b"\r\n"):
        return _statement(data, heads, public_key)
    shown: dict[str, Any]
    document = read_document(data)
    if document["format"] == CONSISTENCY:
        both = verify_consistency(document)
        shown = {
            "holds": "consistency",
            "review": both.review,
            "extends": f"{both.first.size} {both.first.root}",
        }
        return shown | _led_to([both.second, both.first], heads)
    one = verify_inclusion(document)
    shown = {"holds": "inclusion", "review": one.review, "entry": one.entry["seq"], "says": one.entry}
    return shown | _led_to([one.head], heads)


def _statement(data: bytes, heads: Sequence[Checkpoint], public_key: Path | None) -> dict[str, Any]:
    if public_key is None:
        raise ProofError(
            "A signature can be checked with the signer's public key only.",
            next_step="Name it with --key; it ends in .pub.",
        )
    try:
        key = public_key.read_bytes()
    except OSError as error:
        raise ProofError("The key cannot be read.", file=str(public_key), found=error.strerror) from error
    statement = verify_statement(data.decode("utf-8", "replace"), key)
    shown: dict[str, Any] = {
        "holds": "signature",
        "signed by": key_id(read_public_key(key)),
        **statement.facts,
    }
    if statement.head is not None:
        shown |= _led_to([statement.head], heads)
    elif heads:
        raise ProofError(
            "A sign-off states no head.", next_step="Check it without --checkpoint and --report."
        )
    return shown


def _led_to(found: Sequence[Head], heads: Sequence[Checkpoint]) -> dict[str, Any]:
    """Check that each trusted head is one of those shown, and return the first of these."""
    for trusted in heads:
        if Head(trusted.size, trusted.root) not in found:
            raise ProofError(
                f"It holds in itself, but does not lead to the head given ({trusted.source}).",
                found="; ".join(f"{head.size} {head.root}" for head in found),
                expected=f"{trusted.size} {trusted.root}",
                next_step="Ask for a proof against that head; if there is none, the store was altered.",
            )
    return {"size": found[0].size, "root": found[0].root, "trusted": bool(heads)}
