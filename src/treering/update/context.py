"""A review on disk, and the fixed facts of one run."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from treering.errors import NoStoreError, ProtocolError
from treering.protocol import Panel, Protocol, public_text, read_panel, read_protocol
from treering.store import EvidenceStore, create, open_store


@dataclass(frozen=True)
class Review:
    """A review folder with its config read and checked.

    Parameters
    ----------
    folder : Path
        The review folder.
    protocol : Protocol
        config/review.toml.
    protocol_text : str
        Its text without the sections on store and delivery, kept in the store with every version.
    panel : Panel
        config/panel.toml.
    """

    folder: Path
    protocol: Protocol
    protocol_text: str
    panel: Panel

    @property
    def intake(self) -> Path:
        """Where reviewers drop files."""
        return self.folder / "intake"

    @property
    def reports(self) -> Path:
        """Where versions are published."""
        return self.folder / "reports"

    @property
    def outbox(self) -> Path:
        """Where notices of the channel "file" are laid."""
        return self.reports / "outbox"

    @property
    def store_place(self) -> str:
        """Path or URL of the evidence store."""
        return self.protocol.store.url or str(self.folder / "store" / "evidence.sqlite")


@dataclass(frozen=True)
class RunContext:
    """What one run fixes once and hands down: the review, the time and the code version."""

    review: Review
    as_of: datetime
    code_version: str

    @property
    def known_at(self) -> str:
        """The run's time as the store writes it: ISO, UTC, whole seconds."""
        return self.as_of.astimezone(UTC).replace(microsecond=0).isoformat().replace("+00:00", "Z")

    @property
    def day(self) -> str:
        """ISO date of the run."""
        return self.known_at[:10]


def read_review(folder: Path) -> Review:
    """Read the config of the review in `folder`.

    Parameters
    ----------
    folder : Path
        The review folder.

    Returns
    -------
    Review

    Raises
    ------
    ProtocolError
        When a config file is missing or has faults.
    """
    config = folder / "config" / "review.toml"
    protocol = read_protocol(config)
    panel_path = folder / "config" / "panel.toml"
    panel = read_panel(panel_path) if panel_path.exists() else Panel(format=1)
    text = public_text(config.read_text(encoding="utf-8"), str(config))
    return Review(folder, protocol, text, panel)


def open_evidence(review: Review, *, make: bool = False) -> EvidenceStore:
    """Open the evidence store of `review`.

    Parameters
    ----------
    review : Review
        The review.
    make : bool
        Lay down an empty store where there is none, and bring one of an earlier version up to date. Only
        an update does; looking never writes.

    Raises
    ------
    StoreError
        When it cannot be opened; NoStoreError when there is none and `make` is not set.
    ProtocolError
        When the store belongs to another review.
    """
    place = review.store_place
    try:
        store = open_store(place, upgrade=make)
    except NoStoreError as error:
        if not make:
            raise NoStoreError(
                "there is no evidence store yet.",
                file=error.file,
                next_step="Run `treering update` once, or correct [store] url in config/review.toml.",
            ) from error
        return create(place, review=review.protocol.review.id)
    if store.review != review.protocol.review.id:
        store.close()
        raise ProtocolError(
            "the evidence store belongs to another review.",
            file=place,
            found=store.review,
            expected=review.protocol.review.id,
            next_step="Set [store] url, or the id of the review, in config/review.toml.",
        )
    return store
