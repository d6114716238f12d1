"""How a delivery fails."""

from __future__ import annotations


class Undelivered(Exception):
    """A message was not accepted; the reason holds no secret.

    ``others_may_go`` says that the receiver refused this one message, so that the next may fare better.
    """

    def __init__(self, reason: str, *, others_may_go: bool = False) -> None:
        super().__init__(reason)
        self.others_may_go = others_may_go
