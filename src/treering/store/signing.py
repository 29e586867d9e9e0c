"""Signed statements: a head of the store, or a person's sign-off of one entry, under an Ed25519 key.

A statement is a small text file. Its first line names its origin, one line each gives a fact, and each
signature covers all lines before the first signature, line ends included::

    treering
    review hand-warming
    size 1024
    root 5d1f...
    date 2026-05-04
    signature 0b6c... BASE64

A sign-off has ``entry``, ``hash`` and ``person`` in place of ``size`` and ``root``. The word after
``signature`` is the key's id: the first 16 hexadecimal digits of the SHA-256 of the public key. The private
key never lies in the review folder: who can alter the store must not be able to sign what it says then.

References
----------
Josefsson S, Liusvaara I. Edwards-Curve Digital Signature Algorithm (EdDSA). RFC 8032 (2017).
"""

from __future__ import annotations

import base64
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from cryptography.exceptions import InvalidSignature

from treering.errors import ProofError
from treering.store.chain import true_date
from treering.store.entries import Head, StoredEntry
from treering.store.keys import key_id, private_key, public_key

ORIGIN = "treering"
_HEAD = ("review", "size", "root", "date")
_SIGN_OFF = ("review", "entry", "hash", "person", "date")


@dataclass(frozen=True, slots=True)
class Statement:
    """A signed text, taken apart.

    Parameters
    ----------
    facts : dict of str to str
        Word to value, in the order of the text.
    signed : bytes
        What the signatures cover.
    signatures : tuple of (str, bytes)
        Key id and signature.
    """

    facts: dict[str, str]
    signed: bytes
    signatures: tuple[tuple[str, bytes], ...]

    @property
    def head(self) -> Head | None:
        """The head it states; None for a sign-off."""
        return Head(int(self.facts["size"]), self.facts["root"]) if "size" in self.facts else None


def sign_head(head: Head, *, review: str, date: str, key: Path, review_folder: Path | None = None) -> str:
    """Sign a head of the store.

    Parameters
    ----------
    head : Head
        Size and root.
    review : str
        Name of the review.
    date : str
        ISO date of the signature.
    key : Path
        File of the private key.
    review_folder : Path, optional
        The review; the key must lie outside it.

    Returns
    -------
    str
        The statement with one signature.

    Raises
    ------
    ProofError
        When the key cannot be used.
    """
    facts = {"review": review, "size": str(head.size), "root": head.root, "date": date}
    return _signed(facts, key, review_folder)


def sign_entry(
    entry: StoredEntry,
    *,
    person: str,
    review: str,
    date: str,
    key: Path,
    review_folder: Path | None = None,
) -> str:
    """Sign off one entry, such as a version or a judgement, in the name of a person.

    Parameters
    ----------
    entry : StoredEntry
        The entry; its hash covers all it says and all that lies before it.
    person : str
        Id of the person who signs.
    review, date, key, review_folder
        As for :func:`sign_head`.

    Returns
    -------
    str
        The statement with one signature.

    Raises
    ------
    ProofError
        When the key cannot be used.
    """
    facts = {"review": review, "entry": str(entry.seq), "hash": entry.hash, "person": person, "date": date}
    return _signed(facts, key, review_folder)


def read_statement(text: str) -> Statement:
    """Take a statement apart, without checking its signatures.

    Parameters
    ----------
    text : str
        As :func:`sign_head` or :func:`sign_entry` returns it.

    Returns
    -------
    Statement
        Facts and signatures.

    Raises
    ------
    ProofError
        When it is no statement.
    """
    lines = text.replace("\r\n", "\n").rstrip("\n").split("\n")
    body = [line for line in lines if not line.startswith("signature ")]
    facts = dict(line.split(" ", 1) for line in body[1:] if " " in line)
    whole = tuple(facts) in (_HEAD, _SIGN_OFF) and len(body) == len(facts) + 1 and lines[: len(body)] == body
    if body[0] != ORIGIN or not whole or len(lines) == len(body):
        raise _unreadable(text)
    number, digest = (facts["size"], facts["root"]) if "size" in facts else (facts["entry"], facts["hash"])
    if not number.isascii() or not number.isdigit() or len(digest) != 64:
        raise _unreadable(text)
    signatures = tuple(_signature(line, text) for line in lines[len(body) :])
    return Statement(facts, _bytes(facts), signatures)


def verify_statement(text: str, public: bytes) -> Statement:
    """Check the signature of a statement under one public key; pure.

    Parameters
    ----------
    text : str
        The statement.
    public : bytes
        The public key as PEM, from a source that is trusted.

    Returns
    -------
    Statement
        What was signed.

    Raises
    ------
    ProofError
        When this key did not sign it, or it was changed afterwards.
    """
    statement, key = read_statement(text), public_key(public)
    name = key_id(key)
    for signer, signature in statement.signatures:
        if signer == name:
            try:
                key.verify(signature, statement.signed)
            except InvalidSignature as error:
                raise _broken("the text was changed after it was signed", name) from error
            return statement
    raise _broken("this key did not sign it", name)


def _signed(facts: Mapping[str, str], key: Path, review_folder: Path | None) -> str:
    true_date(facts["date"])
    for name, value in facts.items():
        if not value or value != value.strip() or not value.isprintable():
            raise ProofError(f"The {name} cannot be signed.", found=repr(value), expected="text on one line")
    signer = private_key(key, review_folder=review_folder)
    data = _bytes(facts)
    return _text(data, {key_id(signer.public_key()): signer.sign(data)})


def _bytes(facts: Mapping[str, str]) -> bytes:
    return "".join(f"{line}\n" for line in (ORIGIN, *(f"{k} {v}" for k, v in facts.items()))).encode()


def _text(data: bytes, signatures: Mapping[str, bytes]) -> str:
    lines = (f"signature {name} {base64.b64encode(made).decode()}\n" for name, made in signatures.items())
    return data.decode() + "".join(lines)


def _signature(line: str, text: str) -> tuple[str, bytes]:
    parts = line.split(" ")
    try:
        _, name, encoded = parts
        return name, base64.b64decode(encoded, validate=True)
    except ValueError as error:
        raise _unreadable(text) from error


def _unreadable(text: str) -> ProofError:
    return ProofError(
        "This is no signed statement of an evidence store.",
        found=text[:200],
        expected=f"a line {ORIGIN!r}, then {', '.join(_HEAD)} or {', '.join(_SIGN_OFF)}, then signatures",
        next_step="Make one with treering store sign.",
    )


def _broken(text: str, name: str) -> ProofError:
    return ProofError(
        f"The signature does not hold: {text}.",
        found=f"key {name}",
        next_step="Ask the signer for the public key and for the statement again.",
    )
