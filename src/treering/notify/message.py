"""One notice on its way to one person, and what every channel shares.

A message has an id that depends on its content only: sent twice after a kill, it is the same file, the same
Message-ID, the same Idempotency-Key.
"""

from __future__ import annotations

import hashlib
import logging
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Protocol, TypeVar

from tenacity import Retrying, retry_if_exception_type, stop_after_attempt, wait_exponential

from treering.errors import NoticeError

TIMEOUT = 20.0
"""Seconds that a connection or an answer may take."""

ATTEMPTS = 3
AnswerT = TypeVar("AnswerT")


@dataclass(frozen=True)
class Message:
    """One notice on its way to one person.

    Parameters
    ----------
    key : str
        Key of the notice in the store.
    person : str
        Whom it is for.
    address : str
        Where the channel sends it; may hold a secret and is never stored or shown.
    subject, text : str
        What is sent.
    date : str
        ISO date of the run.
    """

    key: str
    person: str
    address: str
    subject: str
    text: str
    date: str

    @property
    def id(self) -> str:
        """The message's own id: the same for the same notice, on every machine."""
        return hashlib.sha256(f"{self.key}\n{self.subject}\n{self.text}".encode()).hexdigest()[:32]

    def fails(self, sentence: str, next_step: str | None = None) -> NoticeError:
        """Make the error that says why this message did not reach its person."""
        step = next_step or "It stays in the store and goes out with the next update."
        return NoticeError(f"{self.key} did not reach {self.person}: {sentence}", next_step=step)


class Channel(Protocol):
    """One way to reach people."""

    def send(self, message: Message) -> str:
        """Send the message and return what can be proved of it.

        Raises
        ------
        NoticeError
            If it did not go out.
        """
        ...


class MayPassError(Exception):
    """The network or the other side failed in a way that may pass; the text holds no secret."""


def persist(send: Callable[[], AnswerT], message: Message, pause: float) -> AnswerT:
    """Try a few times while the network fails; nothing else is tried again."""
    try:
        for attempt in Retrying(
            stop=stop_after_attempt(ATTEMPTS),
            wait=wait_exponential(multiplier=pause, max=8 * pause),
            retry=retry_if_exception_type(MayPassError),
            reraise=True,
        ):
            with attempt:
                return send()
    except MayPassError as error:
        raise message.fails(f"{error} ({ATTEMPTS} attempts).") from error
    raise AssertionError("unreachable: the last attempt returns or raises")


@contextmanager
def hushed(*names: str) -> Iterator[None]:
    """Keep libraries from logging an address: it may hold a token, whatever the level of logging."""
    loggers = [logging.getLogger(name) for name in names]
    before = [logger.disabled for logger in loggers]
    for logger in loggers:
        logger.disabled = True
    try:
        yield
    finally:
        for logger, disabled in zip(loggers, before, strict=True):
            logger.disabled = disabled
