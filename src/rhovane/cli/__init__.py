"""Commands: each parses, calls one function, prints, and sets the exit code."""

from rhovane.cli import decide, feed, look, page, run  # the commands put themselves into the group
from rhovane.cli.entry import main

__all__ = ["decide", "feed", "look", "main", "page", "run"]
