"""Ed25519 keys in files outside the review folder."""

from __future__ import annotations

import os
import stat
from hashlib import sha256
from pathlib import Path

from cryptography.exceptions import UnsupportedAlgorithm
from cryptography.hazmat.primitives import serialization
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey, Ed25519PublicKey

from treering.errors import ProofError


def make_key(path: Path, *, review_folder: Path | None = None) -> str:
    """Make a key: the private one at `path`, readable by its owner only, the public one beside it.

    Parameters
    ----------
    path : Path
        File to make; the public key is written to the same name with ``.pub`` added.
    review_folder : Path, optional
        The review; the key must lie outside it.

    Returns
    -------
    str
        Id of the key.

    Raises
    ------
    ProofError
        When the place lies in the review folder, is taken or cannot be written to.
    """
    _must_be_outside(path, review_folder)
    key = Ed25519PrivateKey.generate()
    private = key.private_bytes(
        serialization.Encoding.PEM, serialization.PrivateFormat.PKCS8, serialization.NoEncryption()
    )
    public = key.public_key().public_bytes(
        serialization.Encoding.PEM, serialization.PublicFormat.SubjectPublicKeyInfo
    )
    for place, data, mode in ((path, private, 0o600), (_public_path(path), public, 0o644)):
        try:
            place.parent.mkdir(parents=True, exist_ok=True)
            with os.fdopen(os.open(place, os.O_WRONLY | os.O_CREAT | os.O_EXCL, mode), "wb") as file:
                file.write(data)
        except OSError as error:
            raise ProofError(
                "The key cannot be written.",
                file=str(place),
                found=error.strerror,
                next_step="Choose another place; a key is never written over.",
            ) from error
    return key_id(key.public_key())


def key_id(key: Ed25519PublicKey) -> str:
    """Return the id of a key.

    Parameters
    ----------
    key : Ed25519PublicKey
        The public key.

    Returns
    -------
    str
        16 hexadecimal digits.
    """
    raw = key.public_bytes(serialization.Encoding.Raw, serialization.PublicFormat.Raw)
    return sha256(raw).hexdigest()[:16]


def _public_path(path: Path) -> Path:
    return path.with_name(path.name + ".pub")


def _must_be_outside(path: Path, review_folder: Path | None) -> None:
    if review_folder is not None and path.resolve().is_relative_to(review_folder.resolve()):
        raise ProofError(
            "A private key must not lie in the review folder.",
            file=str(path),
            next_step="Keep it where only the one who signs can read it: who may write to the store could "
            "sign for them otherwise.",
        )


def private_key(path: Path, *, review_folder: Path | None = None) -> Ed25519PrivateKey:
    """Read a private key.

    Parameters
    ----------
    path : Path
        File of the key.
    review_folder : Path, optional
        The review; the key must lie outside it.

    Returns
    -------
    Ed25519PrivateKey
        The key.

    Raises
    ------
    ProofError
        When it lies in the review folder, others may read it, or it is no key.
    """
    _must_be_outside(path, review_folder)
    try:
        if os.name == "posix" and path.stat().st_mode & (stat.S_IRWXG | stat.S_IRWXO):
            raise ProofError(
                "Others than its owner may read the private key.",
                file=str(path),
                next_step="Take the right away (chmod 600) and consider the key known.",
            )
        key = serialization.load_pem_private_key(path.read_bytes(), password=None)
    except (OSError, ValueError, TypeError, UnsupportedAlgorithm) as error:
        raise _no_key(str(path), error) from error
    if not isinstance(key, Ed25519PrivateKey):
        raise _no_key(str(path), type(key).__name__)
    return key


def public_key(data: bytes) -> Ed25519PublicKey:
    """Read a public key.

    Parameters
    ----------
    data : bytes
        The key as PEM.

    Returns
    -------
    Ed25519PublicKey
        The key.

    Raises
    ------
    ProofError
        When it is none.
    """
    try:
        key = serialization.load_pem_public_key(data)
    except (ValueError, UnsupportedAlgorithm) as error:
        raise _no_key(None, error) from error
    if not isinstance(key, Ed25519PublicKey):
        raise _no_key(None, type(key).__name__)
    return key


def _no_key(file: str | None, found: object) -> ProofError:
    return ProofError(
        "There is no Ed25519 key to be read here.",
        file=file,
        found=found,
        next_step="Make one with treering store make-key; the public one ends in .pub.",
    )
