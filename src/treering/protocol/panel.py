"""config/panel.toml as values: who is told what, by which channel, with which declared interests."""

from __future__ import annotations

from datetime import date
from typing import Literal, Self

from pydantic import model_validator

from treering.protocol.base import Identifier, Part, Text
from treering.terms import EventClass


class Interest(Part):
    """A dated declaration of a panel member."""

    date: date
    text: str
    outcomes: tuple[Identifier, ...] = ()
    recused: bool = False


class Member(Part):
    """One panel member: what they follow and how they are told."""

    id: Identifier
    name: Text
    follows: tuple[str, ...] = ("all",)
    events: tuple[EventClass, ...] = tuple(EventClass)
    channel: Literal["file", "email", "webhook", "apprise"] = "file"
    address: str = ""
    interests: tuple[Interest, ...] = ()

    @model_validator(mode="after")
    def _address_fits_channel(self) -> Self:
        if self.channel != "file" and not self.address:
            raise ValueError(f"channel {self.channel} needs an address")
        return self


class Panel(Part):
    """The whole of config/panel.toml."""

    format: Literal[1]
    members: tuple[Member, ...] = ()
