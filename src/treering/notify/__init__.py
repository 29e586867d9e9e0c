"""From events of a version to people told of them, each once, with what was said kept in the store."""

from treering.notify.build import build_notices, is_recused
from treering.notify.deliver import Delivered, Sent, deliver, deliver_pending, pending
from treering.notify.event import Event
from treering.notify.mail import Email
from treering.notify.message import Channel, Message
from treering.notify.outbox import FileOutbox
from treering.notify.web import AppriseService, Webhook

__all__ = [
    "AppriseService",
    "Channel",
    "Delivered",
    "Email",
    "Event",
    "FileOutbox",
    "Message",
    "Sent",
    "Webhook",
    "build_notices",
    "deliver",
    "deliver_pending",
    "is_recused",
    "pending",
]
