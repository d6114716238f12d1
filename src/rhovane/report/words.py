"""Numbers, days and states in words."""

from __future__ import annotations

import datetime as dt
import math

from rhovane.model import Alert, AlertState, CorrelationEstimate
from rhovane.review import AlertEntry
from rhovane.settings import PairSettings, SeriesSettings, Settings

UNITS = {"ug/m3": "µg/m³", "mg/m3": "mg/m³", "degC": "°C", "deg": "°", "W/m2": "W/m²", "1/h": "an hour"}
STATE_MARKS = {
    AlertState.UNACKNOWLEDGED: "●",
    AlertState.RETURNED_UNACKNOWLEDGED: "◐",
    AlertState.ACKNOWLEDGED: "○",
    AlertState.RETURNED: "◌",
    AlertState.SHELVED: "⏸",
    AlertState.OUT_OF_SERVICE: "⊘",
}


def unit_words(unit: str) -> str:
    """A unit as people write it."""
    return UNITS.get(unit, unit)


def signed(value: float | None, digits: int = 2) -> str:
    """A number with its sign, a true minus; "–" where there is none."""
    if value is None or math.isnan(value):
        return "–"
    return f"{value:+.{digits}f}".replace("-", "−")


def interval(low: float | None, high: float | None) -> str:
    """The ends of an interval in words."""
    if low is None or high is None or math.isnan(low) or math.isnan(high):
        return "no interval"
    return f"{signed(low)} to {signed(high)}"


def estimate_words(estimate: CorrelationEstimate, statistic: str) -> str:
    """A correlation with everything it rests on."""
    span = f"{estimate.first_day} to {estimate.last_day}, {estimate.n_pairs} joint hours"
    if estimate.n_effective is not None:
        span += f" worth {estimate.n_effective:.0f} independent ones"
    if estimate.statistic is None:
        return f"not computable ({estimate.reason}); {span}"
    return f"{statistic} {signed(estimate.statistic)} (95 %: {interval(estimate.low, estimate.high)}); {span}"


def statistic_name(settings: Settings) -> str:
    """Short name of the rank correlation in use."""
    return "ρ" if settings.correlation.statistic == "spearman" else "τ-b"


def clock_words(settings: Settings) -> str:
    """The clock that all pages and pictures use."""
    return f"standard time, UTC{settings.network.standard_time.replace('-', '−')}"


def local(settings: Settings, moment: dt.datetime | None, pattern: str = "%Y-%m-%d %H:%M") -> str:
    """A moment on the network's standard clock."""
    if moment is None:
        return "–"
    return moment.astimezone(dt.timezone(settings.network.standard_offset)).strftime(pattern)


def series_words(series: SeriesSettings) -> str:
    """A series by key and label."""
    return f"{series.key} ({series.label})" if series.label else series.key


def recipe_words(settings: Settings, recipe: PairSettings) -> list[str]:
    """What a pair's recipe does, one sentence each."""
    lags = settings.lags_of(recipe)
    told = [
        f"{settings.correlation.statistic.capitalize()} rank correlation in windows of "
        f"{settings.correlation.window_hours} hours, lags {lags.start} to {lags.stop - 1} hours".replace(
            "-", "−"
        ),
        f"a window needs {settings.correlation.min_coverage:.0%} of the hours that count",
    ]
    if recipe.adjusted_for:
        told.append(f"held fixed (partial rank correlation): {', '.join(recipe.adjusted_for)}")
    if recipe.sector:
        told.append(
            f"only hours with wind from {recipe.sector.from_deg:g}° to {recipe.sector.to_deg:g}° "
            f"({recipe.sector.direction})"
        )
    if recipe.hours:
        told.append(f"only {recipe.hours[0]:02d} to {recipe.hours[1]:02d} h civil time")
    if recipe.working_days_only:
        told.append("only working days")
    if recipe.wet_only:
        told.append("only hours in which either side is above zero")
    return told


def suspect_words(alert: Alert) -> str:
    """Where to look first."""
    kind, _, name = (alert.suspect or f"pair {alert.pair_key}").partition(" ")
    match kind:
        case "series":
            return f"series {name}"
        case "station":
            return f"station {name}"
        case "network":
            return "the whole network"
        case _:
            return "the relation itself, or either side"


def headline(alert: Alert) -> str:
    """One sentence: what changed."""
    first, _, rest = alert.pair_key.partition("~")
    second, _, variant = rest.partition("[")
    recipe = f" ({variant.rstrip(']')})" if variant else ""
    if alert.kind == "timing":
        return f"{first} and {second}{recipe}: the best lag moved"
    apart = "less closely" if alert.direction == "weaker" else "more closely"
    return f"{first} and {second}{recipe} move together {apart}"


def state_words(entry: AlertEntry) -> str:
    """Mark and state, with outcome and what became of the change."""
    standing = entry.standing
    words = f"{STATE_MARKS[standing.state]} {standing.state.value}"
    if standing.state is AlertState.SHELVED:
        words += f" until {standing.shelved_until}"
    if standing.superseded:
        words += ", superseded by revision"
    if standing.outcome is not None:
        words += f"; outcome: {standing.outcome.value}"
    return words


def lasting_words(entry: AlertEntry) -> str:
    """Whether the change still lasts."""
    ended = entry.standing.ended
    if ended is None:
        return "still lasts"
    day = ended.payload.get("day", f"{ended.at:%Y-%m-%d}")
    return {
        "returned to normal": f"ended, back to normal {day}",
        "new baseline": f"ended, became the new normal {day}",
    }.get(ended.kind.value, f"ended, {ended.kind.value} {ended.at:%Y-%m-%d}")
