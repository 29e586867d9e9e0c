"""Commands that sign: keys, heads and sign-offs."""

from __future__ import annotations

from pathlib import Path

from treering.cli.keeping import open_store_of, seq_of, size_of, tell, write_out, wrong
from treering.cli.output import EXIT_DONE


def make_signing_key(key: Path, folder: Path = Path(), /, *, json: bool = False) -> int:
    """Make a key for signatures, outside the review folder.

    Parameters
    ----------
    key : Path
        File of the private key; the public one is written beside it with .pub added.
    folder : Path
        The review folder.
    json : bool
        Print JSON.
    """
    from treering.store.keys import make_key

    name = make_key(key, review_folder=folder)
    tell({"key": name, "private": str(key), "public": f"{key}.pub"}, json)
    return EXIT_DONE


def sign(
    key: Path,
    folder: Path = Path(),
    /,
    *,
    version: int | None = None,
    entry: str | None = None,
    person: str | None = None,
    to: Path | None = None,
) -> int:
    """Sign the head of today, the head of a version, or one entry in a person's name.

    Parameters
    ----------
    key : Path
        File of the private key, outside the review folder.
    folder : Path
        The review folder.
    version : int, optional
        Sign the head that this version states.
    entry : str, optional
        Number or key of an entry to sign off.
    person : str, optional
        Id of the person who signs it off.
    to : Path, optional
        File to write; printed when left out.
    """
    from datetime import UTC, datetime

    from treering.store.signing import sign_entry, sign_head

    if (entry is None) != (person is None):
        raise wrong("a sign-off needs both an entry and a person.", "--entry and --person")
    today = datetime.now(UTC).date().isoformat()
    with open_store_of(folder) as opened:
        review = opened.review
        if entry is not None and person is not None:
            place = seq_of(opened, entry)
            (signed,) = opened.entries(since=place, until=place + 1)
            text = sign_entry(signed, person=person, review=review, date=today, key=key, review_folder=folder)
        else:
            head = opened.head(size_of(opened, version, None))
            text = sign_head(head, review=review, date=today, key=key, review_folder=folder)
    return write_out(text, to)
