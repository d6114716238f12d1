"""Sending messages: a file of JSON lines, CloudEvents over HTTP, e-mail."""

from rhovane.delivery.channels import Send, channel_of
from rhovane.delivery.cloudevents import as_cloudevent
from rhovane.delivery.failure import Undelivered

__all__ = ["Send", "Undelivered", "as_cloudevent", "channel_of"]
