"""Commands: each parses, calls one function, prints, and sets the exit code."""

from rhovane.cli.entry import main

__all__ = ["main"]
