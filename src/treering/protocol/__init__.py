"""The protocol of a review and its panel, read from config/ as validated, hashed values."""

from treering.protocol.base import Part
from treering.protocol.panel import Interest, Member, Panel
from treering.protocol.plan import (
    Amendment,
    Delivery,
    Living,
    Monitoring,
    Outcome,
    Person,
    Pooling,
    Protocol,
    ReviewHead,
    StorePlace,
    Verification,
)
from treering.protocol.reading import public_text, read_panel, read_protocol

__all__ = [
    "Amendment",
    "Delivery",
    "Interest",
    "Living",
    "Member",
    "Monitoring",
    "Outcome",
    "Panel",
    "Part",
    "Person",
    "Pooling",
    "Protocol",
    "ReviewHead",
    "StorePlace",
    "Verification",
    "public_text",
    "read_panel",
    "read_protocol",
]
