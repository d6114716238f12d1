"""Commands that record a person's decision: acknowledge, shelve, outcome."""

from __future__ import annotations

import datetime as dt
import getpass
from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import click

from rhovane.cli.alert_wording import state_in_full
from rhovane.cli.entry import main, utc_now, writes_store
from rhovane.model import EventKind, Outcome

if TYPE_CHECKING:
    from rhovane.store import Store


def by_a_person(command: Callable[..., Any]) -> Callable[..., Any]:
    """Give a command ID, ``--who`` and ``--note``."""
    note = click.option("--note", default="", help="What you saw and why you decided so.")
    who = click.option("--who", default=getpass.getuser, show_default="your login", help="Your name.")
    return click.argument("alert_id", metavar="ID", type=int)(who(note(command)))


def _record(
    store: Store, alert_id: int, kind: EventKind, who: str, note: str, payload: dict[str, Any]
) -> None:
    from rhovane.review import record_decision

    entry = record_decision(store, alert_id, kind, now=utc_now(), who=who, note=note, payload=payload)
    acts = entry.events[-1].payload.get("acts_from")
    click.echo(
        f"Alert {alert_id}: {state_in_full(entry)}" + (f"; acts from the night of {acts}" if acts else "")
    )


@main.command()
@by_a_person
@writes_store
def acknowledge(store: Store, alert_id: int, who: str, note: str) -> None:
    """Record that you have seen an alert and are dealing with it."""
    _record(store, alert_id, EventKind.ACKNOWLEDGED, who, note, {})


@main.command()
@by_a_person
@click.option(
    "--until",
    type=click.DateTime(formats=["%Y-%m-%d"]),
    required=True,
    help="When it comes back, YYYY-MM-DD.",
)
@writes_store
def shelve(store: Store, alert_id: int, who: str, note: str, until: dt.datetime) -> None:
    """Put an alert aside until a date; it comes back by itself."""
    _record(store, alert_id, EventKind.SHELVED, who, note, {"until": until.date().isoformat()})


def _outcome(_ctx: click.Context, _param: click.Parameter, text: str) -> str:
    """An outcome as it stands in the log; hyphens may stand for spaces on the command line."""
    word = text.replace("-", " ").replace("_", " ").lower()
    if word not in {o.value for o in Outcome}:
        known = ", ".join(o.value.replace(" ", "-") for o in Outcome)
        raise click.BadParameter(f"{text!r} is not an outcome; known: {known}")
    return word


@main.command()
@by_a_person
@click.argument("found", metavar="OUTCOME", callback=_outcome)
@click.option(
    "--until",
    type=click.DateTime(formats=["%Y-%m-%d"]),
    default=None,
    help="instrument, data-handling: last day at fault, YYYY-MM-DD; default: until the change has ended.",
)
@click.option(
    "--new-baseline",
    is_flag=True,
    help="real-change: take the new level as normal now, not only when it has lasted.",
)
@writes_store
def outcome(
    store: Store,
    alert_id: int,
    who: str,
    note: str,
    found: str,
    until: dt.datetime | None,
    new_baseline: bool,
) -> None:
    """Record what was behind an alert.

    OUTCOME is one of: instrument, data-handling, real-change, weather-or-season, false, undetermined. Days of an
    instrument or data-handling fault never enter a reference of the alert's pairs. A decision acts from the next
    night on; what earlier nights decided stays.
    """
    payload: dict[str, Any] = {"outcome": found}
    if until is not None:
        payload["until"] = until.date().isoformat()
    if new_baseline:
        payload["new_baseline"] = True
    _record(store, alert_id, EventKind.OUTCOME, who, note, payload)
