"""Making and opening stores."""

from __future__ import annotations

from pathlib import Path

from treering.errors import NoStoreError, StoreError
from treering.store.connection import engine_for, place_of, reading, set_write_ahead, store_url, writing
from treering.store.repo import EvidenceStore
from treering.store.schema import check_revision, lay_out, migrate, revision_of


def create(target: str | Path, *, review: str) -> EvidenceStore:
    """Make an empty store.

    Parameters
    ----------
    target : str or Path
        Path of a SQLite file that does not exist yet, or the URL of an empty PostgreSQL database.
    review : str
        Name of the review it belongs to.

    Returns
    -------
    EvidenceStore
        Open and empty.

    Raises
    ------
    StoreError
        When there is a store already, or the place cannot be written to.
    """
    url = store_url(target)
    if url.get_backend_name() == "sqlite":
        _make_folder(Path(str(url.database)).parent)
    engine = engine_for(url)
    try:
        set_write_ahead(engine)
        lay_out(engine, review)
    except BaseException:
        engine.dispose()
        raise
    return EvidenceStore(engine)


def open_store(target: str | Path, *, upgrade: bool = True) -> EvidenceStore:
    """Open a store.

    Parameters
    ----------
    target : str or Path
        Path of a SQLite file or a PostgreSQL URL.
    upgrade : bool, optional
        Bring the tables up to date when an earlier version of treering made the store; without it such a
        store is refused, so that looking never writes.

    Returns
    -------
    EvidenceStore
        Open.

    Raises
    ------
    StoreError
        When there is none, it is no store, or a later version of treering made it.
    """
    url = store_url(target)
    place = place_of(url)
    if url.get_backend_name() == "sqlite" and not Path(str(url.database)).is_file():
        raise _absent(place)
    engine = engine_for(url)
    try:
        with reading(engine) as connection:
            revision = revision_of(connection)
        if revision is None:
            raise _absent(place)
        if check_revision(revision):
            if not upgrade:
                raise StoreError(
                    "An earlier version of treering made this store.",
                    file=place,
                    found=f"revision {revision}",
                    next_step="Run `treering update` once: it updates the tables and changes no hash.",
                )
            with writing(engine, lock="entry") as connection:
                migrate(connection)
    except BaseException:
        engine.dispose()
        raise
    return EvidenceStore(engine)


def _absent(place: str) -> NoStoreError:
    return NoStoreError(
        "There is no evidence store here.",
        file=place,
        next_step="Run `treering update` once to make one, or correct [store] in config/review.toml.",
    )


def _make_folder(folder: Path) -> None:
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise StoreError(
            "The folder of the store cannot be made.",
            file=str(folder),
            found=error.strerror,
            next_step="Give the account that runs treering the right to write there.",
        ) from error
