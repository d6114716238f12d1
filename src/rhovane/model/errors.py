"""What can go wrong, and the exit code each ending has.

RhovaneError
├── SettingsError       a mistake in the settings file          exit 2
├── FeedError           a feed file that cannot be read at all  exit 1 (the night goes on without it)
├── StoreLocked         another process holds the store         exit 5
├── StoreDamaged        the store contradicts itself            exit 6
└── NotFound            an alert, pair or series is not known   exit 1
"""

from __future__ import annotations

from enum import IntEnum


class ExitCode(IntEnum):
    """How a command ends; the table in README.md lists them for people."""

    WELL = 0
    FAILED = 1
    SETTINGS_MISTAKE = 2
    NOTHING_NEW = 3
    NIGHT_INCOMPLETE = 4
    STORE_LOCKED = 5
    STORE_DAMAGED = 6
    NEEDS_ATTENTION = 7


class RhovaneError(Exception):
    """A failure the person can act on: says what is wrong, where, and what to do."""

    exit_code = ExitCode.FAILED


class SettingsError(RhovaneError):
    """The settings file has mistakes; all of them are in the message."""

    exit_code = ExitCode.SETTINGS_MISTAKE


class FeedError(RhovaneError):
    """A feed file cannot be read at all (missing, empty, wrong form)."""


class StoreLocked(RhovaneError):
    """Another process holds the store."""

    exit_code = ExitCode.STORE_LOCKED


class StoreDamaged(RhovaneError):
    """The store contradicts itself or was written by a newer program."""

    exit_code = ExitCode.STORE_DAMAGED


class NotFound(RhovaneError):
    """Something named on the command line is not known here."""
