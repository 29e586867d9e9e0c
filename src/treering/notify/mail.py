"""Notices by e-mail."""

from __future__ import annotations

import smtplib
import ssl
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from email.message import EmailMessage
from email.utils import format_datetime

from treering.notify.message import TIMEOUT, MayPassError, Message, persist
from treering.protocol import Delivery


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
        persist(lambda: self._hand_over(mail, message), message, self.pause)
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
            raise MayPassError(f"the mail server could not be reached: {reason}") from error

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
        return MayPassError(told)
    return message.fails(f"{told}.")
