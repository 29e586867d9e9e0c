"""The file outbox: one text file a notice."""

from __future__ import annotations

import os
import re
from dataclasses import dataclass
from pathlib import Path

from treering.notify.message import Message


@dataclass(frozen=True)
class FileOutbox:
    """A folder with one text file a notice."""

    folder: Path

    def path_of(self, message: Message) -> Path:
        """Return the file of a message: notice-3-pain-boundary-crossed-chair.txt."""
        return self.folder / (re.sub(r"[^A-Za-z0-9._-]+", "-", message.key) + ".txt")

    def send(self, message: Message) -> str:
        """Write the file, whole or not at all; one that is there with the same words is left."""
        path = self.path_of(message)
        content = f"Subject: {message.subject}\n\n{message.text}".encode()
        try:
            if path.exists():
                if path.read_bytes() == content:
                    return path.name
                raise message.fails(
                    f"{path.name} is there with other words.", "Move that file away and update again."
                )
            path.parent.mkdir(parents=True, exist_ok=True)
            draft = path.with_name(f".{path.name}.tmp")
            with draft.open("wb") as stream:
                stream.write(content)
                stream.flush()
                os.fsync(stream.fileno())
            draft.replace(path)
        except OSError as error:
            raise message.fails(f"the outbox can't be written: {error.strerror}.") from error
        return path.name
