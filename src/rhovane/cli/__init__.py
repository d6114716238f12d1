"""Commands: each parses, calls one function, prints, and sets the exit code."""

from rhovane.cli import (
    decide,
    feed,
    keep,
    look,
    page,
    run,
    site,
    unattended,
)  # the commands put themselves into the group
from rhovane.cli.entry import main

__all__ = ["decide", "feed", "keep", "look", "main", "page", "run", "site", "unattended"]
