"""The command group, and what all commands share: settings, the store, errors as exit codes."""

from __future__ import annotations

import datetime as dt
import functools
import inspect
import json
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from rhovane.model import ExitCode, RhovaneError

if TYPE_CHECKING:
    from rhovane.settings import Settings
    from rhovane.store import Store

DEFAULT_SETTINGS = Path("config/monitor.toml")


class Ending(click.exceptions.Exit):
    """Ends the command with one of the documented exit codes."""

    def __init__(self, code: ExitCode) -> None:
        super().__init__(int(code))


class Commands(click.Group):
    """A group that turns the program's errors into a message and their exit code."""

    def invoke(self, ctx: click.Context) -> Any:
        """Run the command; an error of ours is told in its own words, without a traceback."""
        try:
            return super().invoke(ctx)
        except RhovaneError as error:
            click.echo(f"rhovane: {error}", err=True)
            raise Ending(error.exit_code) from error


@click.group(cls=Commands, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="rhovane", prog_name="rhovane")
def main() -> None:
    """A night watch over how environmental series move together.

    Reads new readings, recomputes rolling rank correlations, and raises an alert when a relationship
    has changed sharply, at a false-alarm rate that you set. Try `rhovane demo` first.
    """


def with_settings(command: Callable[..., Any]) -> Callable[..., Any]:
    """Give a command ``--config FILE`` and pass it the path."""
    option = click.option(
        "--config",
        "config",
        type=click.Path(path_type=Path, dir_okay=False),
        default=DEFAULT_SETTINGS,
        show_default=True,
        help="Settings file.",
    )
    return option(command)


def with_json(command: Callable[..., Any]) -> Callable[..., Any]:
    """Give a command ``--json``."""
    return click.option("--json", "as_json", is_flag=True, help="Print JSON for machines.")(command)


def reads_store(command: Callable[..., Any]) -> Callable[..., Any]:
    """Load the settings, open the store for reading, and pass it (and ``settings`` if asked for) on."""
    return _opens_store(command, read_only=True)


def writes_store(command: Callable[..., Any]) -> Callable[..., Any]:
    """Load the settings, open the store for writing, and pass it (and ``settings`` if asked for) on."""
    return _opens_store(command, read_only=False)


def _opens_store(command: Callable[..., Any], *, read_only: bool) -> Callable[..., Any]:
    wants_settings = "settings" in inspect.signature(command).parameters

    @with_settings
    @functools.wraps(command)
    def run(config: Path, **options: Any) -> Any:
        settings = settings_at(config)
        if wants_settings:
            options["settings"] = settings
        with store_of(settings, read_only=read_only) as store:
            return command(store=store, **options)

    return run


def settings_at(config: Path) -> Settings:
    """The settings in a file."""
    from rhovane.settings import load_settings

    return load_settings(config)


def store_of(settings: Settings, *, read_only: bool, path: Path | None = None) -> Store:
    """The network's store, or a copy of it at ``path``, opened as its settings say."""
    from rhovane.store import open_store

    return open_store(
        path or settings.store_path,
        lock_wait_s=settings.store.lock_wait_s,
        memory_limit_mb=settings.store.memory_limit_mb,
        threads=settings.store.threads,
        read_only=read_only,
    )


def utc_now() -> dt.datetime:
    """The clock, read here and nowhere below."""
    return dt.datetime.now(dt.UTC)


def print_json(value: Any) -> None:
    """Print plain values as JSON; numbers that are not finite become null."""
    click.echo(json.dumps(_finite(value), indent=2, ensure_ascii=False))


def _finite(value: Any) -> Any:
    if isinstance(value, dict):
        return {k: _finite(v) for k, v in value.items()}
    if isinstance(value, list | tuple):
        return [_finite(v) for v in value]
    if isinstance(value, float) and (value != value or value in (float("inf"), float("-inf"))):
        return None
    return value
