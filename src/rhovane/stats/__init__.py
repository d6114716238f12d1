"""Rank correlation under dependence and gaps: arrays in, named results out.

Nothing here knows a database, a clock, a file or a table library. Names are loaded when first used, so
that importing the package is free of compiled code.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

# Public name -> module of this package that holds it.
_HOME = {
    "ConstancyTest": "constancy",
    "CorrelationNetwork": "correlation_network",
    "LagScan": "scan_lags",
    "LagTrack": "lag_track",
    "RankCorrelationTest": "rank_test",
    "RollingCorrelation": "rolling",
    "WindComponents": "wind",
    "WindowScan": "scan_window",
    "WindowTable": "pair_windows",
    "constancy_test": "constancy",
    "correlate_network": "correlation_network",
    "false_discovery": "multiplicity",
    "innovations": "lag_track",
    "lag_scan": "scan_lags",
    "monitor_network": "monitor",
    "monitor_pair": "monitor",
    "partial_window": "partial",
    "rank_correlation_test": "rank_test",
    "remove_cycle": "cycle",
    "rolling_rank_correlation": "rolling",
    "track_lag": "lag_track",
    "wind_along": "wind",
    "wind_components": "wind",
    "window_scan": "scan_window",
    "window_table": "pair_windows",
}

__all__ = sorted(_HOME)


def __getattr__(name: str) -> Any:
    """Load a public name from its module at first use."""
    if name not in _HOME:
        raise AttributeError(f"module 'rhovane.stats' has no attribute {name!r}")
    value = getattr(import_module(f"rhovane.stats.{_HOME[name]}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return __all__
