"""The local page: the morning review in a browser, on this machine only unless a token guards it."""

from rhovane.web.app import make_app
from rhovane.web.serving import PageServer

__all__ = ["PageServer", "make_app"]
