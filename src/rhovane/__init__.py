"""rhovane: a night watch over how environmental series move together.

The names below are imported on first use, so that ``import rhovane`` stays light.
"""

from __future__ import annotations

from importlib import import_module
from importlib.metadata import PackageNotFoundError, version
from typing import Any

try:
    __version__ = version("rhovane")
except PackageNotFoundError:  # run from a checkout that is not installed
    __version__ = "0+checkout"

_STATISTICS = (
    "lag_scan",
    "monitor_network",
    "monitor_pair",
    "rank_correlation_test",
    "rolling_rank_correlation",
)

__all__ = [*_STATISTICS, "__version__"]


def __getattr__(name: str) -> Any:
    if name in _STATISTICS:
        return getattr(import_module("rhovane.stats"), name)
    raise AttributeError(f"module 'rhovane' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
