"""Notices over the web: a webhook, or any service that apprise knows."""

from __future__ import annotations

from dataclasses import dataclass
from urllib.parse import urlsplit

import requests

from treering.notify.message import TIMEOUT, MayPassError, Message, hushed, persist


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
        return persist(lambda: self._post(message, str(parts.hostname)), message, self.pause)

    def _post(self, message: Message, host: str) -> str:
        content = {
            "notice": message.key,
            "person": message.person,
            "subject": message.subject,
            "text": message.text,
        }
        try:
            with hushed("urllib3.connectionpool"):
                answer = requests.post(
                    message.address,
                    json=content,
                    headers={"Idempotency-Key": message.id, "User-Agent": "treering"},
                    timeout=self.timeout,
                    allow_redirects=False,
                )
        except (requests.ConnectionError, requests.Timeout):
            # From None: the text of the cause holds the address, and with it perhaps a token.
            raise MayPassError(f"{host} could not be reached") from None
        except requests.RequestException as error:
            raise message.fails(f"the request to {host} failed ({type(error).__name__}).") from None
        if answer.status_code == 429 or answer.status_code >= 500:
            raise MayPassError(f"{host} answered {answer.status_code}")
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
        with hushed("apprise", "urllib3.connectionpool"):
            known = service.add(message.address)
            taken = known and service.notify(title=message.subject, body=message.text, body_format=plain)
        if not known:
            raise message.fails("apprise does not know this address.", "Correct it in config/panel.toml.")
        if not taken:
            raise message.fails("the service that apprise reaches did not take it.")
        return "sent"
