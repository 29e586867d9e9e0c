"""How a notice reaches a person: file outbox, e-mail, webhook, or anything apprise knows.

Each channel sends one message and returns what it can prove of it, or raises NoticeError. A message has an
id that depends on its content only: sent twice after a kill, it is the same file, the same Message-ID, the
same Idempotency-Key.
"""

from __future__ import annotations

import hashlib
import logging
import os
import re
import smtplib
import ssl
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from email.message import EmailMessage
from email.utils import format_datetime
from pathlib import Path
from typing import Protocol, TypeVar
from urllib.parse import urlsplit

import requests
from tenacity import Retrying, retry_if_exception_type, stop_after_attempt, wait_exponential

from treering.errors import NoticeError
from treering.protocol import Delivery

TIMEOUT = 20.0
"""Seconds that a connection or an answer may take."""

ATTEMPTS = 3
AnswerT = TypeVar("AnswerT")


class _TryAgain(Exception):
    """The network or the other side failed in a way that may pass; the text holds no secret."""


@contextmanager
def _hushed(*names: str) -> Iterator[None]:
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


def _persist(send: Callable[[], AnswerT], message: Message, pause: float) -> AnswerT:
    """Try a few times while the network fails; nothing else is tried again."""
    try:
        for attempt in Retrying(
            stop=stop_after_attempt(ATTEMPTS),
            wait=wait_exponential(multiplier=pause, max=8 * pause),
            retry=retry_if_exception_type(_TryAgain),
            reraise=True,
        ):
            with attempt:
                return send()
    except _TryAgain as error:
        raise message.fails(f"{error} ({ATTEMPTS} attempts).") from error
    raise AssertionError("unreachable: the last attempt returns or raises")


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


@dataclass(frozen=True)
class Email:
    """Mail over SMTP; the password comes from an environment variable that the protocol names."""

    delivery: Delivery
    environment: Mapping[str, str]
    pause: float = 0.5
    timeout: float = TIMEOUT

    def send(self, message: Message) -> str:
        """Hand the mail to the server and return its Message-ID."""
        if not self.delivery.smtp_host or not self.delivery.sender:
            raise message.fails(
                "no mail server is set.", "Set smtp_host and sender under [delivery] in config/review.toml."
            )
        mail = self._mail(message)
        _persist(lambda: self._hand_over(mail, message), message, self.pause)
        return str(mail["Message-ID"])

    def _mail(self, message: Message) -> EmailMessage:
        mail = EmailMessage()
        domain = self.delivery.sender.rpartition("@")[2].strip(" >") or "localhost"
        day = datetime.fromisoformat(message.date).replace(tzinfo=UTC)
        try:
            mail["From"] = self.delivery.sender
            mail["To"] = message.address
            mail["Subject"] = message.subject
            mail["Date"] = format_datetime(day)
            mail["Message-ID"] = f"<{message.id}@{domain}>"
            mail["Auto-Submitted"] = "auto-generated"  # RFC 3834: no holiday answers to a program
        except (ValueError, IndexError) as error:
            raise message.fails(
                "sender or address is no mail address.", "Correct it in config/panel.toml or review.toml."
            ) from error
        mail.set_content(message.text)
        return mail

    def _hand_over(self, mail: EmailMessage, message: Message) -> None:
        delivery = self.delivery
        try:
            with smtplib.SMTP(delivery.smtp_host, delivery.smtp_port, timeout=self.timeout) as server:
                if delivery.smtp_starttls:
                    server.starttls(context=ssl.create_default_context())
                if delivery.smtp_user:
                    server.login(delivery.smtp_user, self._password(message))
                server.send_message(mail)
        except smtplib.SMTPException as error:
            raise _smtp_failure(error, message) from error
        except OSError as error:
            reason = error.strerror or type(error).__name__
            raise _TryAgain(f"the mail server could not be reached: {reason}") from error

    def _password(self, message: Message) -> str:
        name = self.delivery.smtp_password_variable
        password = self.environment.get(name, "") if name else ""
        if not password:
            raise message.fails(
                "the mail password is not set.",
                f"Set the environment variable {name or 'that smtp_password_variable should name'}.",
            )
        return password


def _smtp_failure(error: smtplib.SMTPException, message: Message) -> Exception:
    """Tell a failure that may pass (RFC 5321: codes 4xx, a lost connection) from one that won't."""
    if isinstance(error, smtplib.SMTPRecipientsRefused):
        codes = [code for code, _ in error.recipients.values()]
    else:
        codes = [error.smtp_code] if isinstance(error, smtplib.SMTPResponseException) else []
    lost = isinstance(error, smtplib.SMTPServerDisconnected)
    told = f"the mail server answered {codes[0]}" if codes else f"mail failed with {type(error).__name__}"
    if lost or (codes and all(400 <= code < 500 for code in codes)):
        return _TryAgain(told)
    return message.fails(f"{told}.")


@dataclass(frozen=True)
class Webhook:
    """One POST of JSON with an Idempotency-Key."""

    pause: float = 0.5
    timeout: float = TIMEOUT

    def send(self, message: Message) -> str:
        """Post the message and return the status that came back."""
        parts = urlsplit(message.address)
        if parts.scheme not in ("http", "https") or not parts.hostname:
            raise message.fails("the address is no http or https URL.", "Correct it in config/panel.toml.")
        return _persist(lambda: self._post(message, str(parts.hostname)), message, self.pause)

    def _post(self, message: Message, host: str) -> str:
        content = {
            "notice": message.key,
            "person": message.person,
            "subject": message.subject,
            "text": message.text,
        }
        try:
            with _hushed("urllib3.connectionpool"):
                answer = requests.post(
                    message.address,
                    json=content,
                    headers={"Idempotency-Key": message.id, "User-Agent": "treering"},
                    timeout=self.timeout,
                    allow_redirects=False,
                )
        except (requests.ConnectionError, requests.Timeout):
            # From None: the text of the cause holds the address, and with it perhaps a token.
            raise _TryAgain(f"{host} could not be reached") from None
        except requests.RequestException as error:
            raise message.fails(f"the request to {host} failed ({type(error).__name__}).") from None
        if answer.status_code == 429 or answer.status_code >= 500:
            raise _TryAgain(f"{host} answered {answer.status_code}")
        if not 200 <= answer.status_code < 300:
            raise message.fails(f"{host} answered {answer.status_code}.")
        return f"status {answer.status_code}, Idempotency-Key {message.id}"


@dataclass(frozen=True)
class AppriseService:
    """Any service that the apprise library knows; it gives no proof beyond "sent"."""

    def send(self, message: Message) -> str:
        """Send through apprise."""
        import apprise  # loaded here: it takes long, and few reviews use it

        service = apprise.Apprise()
        plain = apprise.NotifyFormat.TEXT
        with _hushed("apprise", "urllib3.connectionpool"):
            known = service.add(message.address)
            taken = known and service.notify(title=message.subject, body=message.text, body_format=plain)
        if not known:
            raise message.fails("apprise does not know this address.", "Correct it in config/panel.toml.")
        if not taken:
            raise message.fails("the service that apprise reaches did not take it.")
        return "sent"
