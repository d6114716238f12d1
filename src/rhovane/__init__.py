"""rhovane: a night watch over how environmental series move together.

The names below are imported on first use, so that ``import rhovane`` stays light.
"""

from __future__ import annotations

from typing import Any

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
        from importlib import import_module

        return getattr(import_module("rhovane.stats"), name)
    if name == "__version__":
        return globals().setdefault("__version__", _version())
    raise AttributeError(f"module 'rhovane' has no attribute {name!r}")


def _version() -> str:
    # Its import costs a fifth of a short command's time.
    from importlib.metadata import PackageNotFoundError, version

    try:
        return version("rhovane")
    except PackageNotFoundError:  # run from a checkout that is not installed
        return "0+checkout"


def __dir__() -> list[str]:
    return sorted(__all__)
