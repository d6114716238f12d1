"""Facts as plain values and back, for the store and for ``--json``: one rule for all frozen dataclasses."""

from __future__ import annotations

import dataclasses
import datetime as dt
import types
import typing
from collections.abc import Mapping
from typing import Any, TypeVar

Fact = TypeVar("Fact")


def plain_of(fact: Any) -> Any:
    """A dataclass as a dict, a tuple as a list, a date as its ISO form; all else as it is."""
    if dataclasses.is_dataclass(fact) and not isinstance(fact, type):
        return {f.name: plain_of(getattr(fact, f.name)) for f in dataclasses.fields(fact)}
    if isinstance(fact, tuple | list):
        return [plain_of(one) for one in fact]
    if isinstance(fact, dt.date):
        return fact.isoformat()
    return fact


def fact_of(kind: type[Fact], plain: Mapping[str, Any]) -> Fact:
    """The dataclass that :func:`plain_of` wrote; a field that is not there takes its default.

    Raises
    ------
    TypeError
        A field is not known, or one without a default is missing.
    """
    hints = typing.get_type_hints(kind)
    return kind(**{name: _read(hints.get(name, Any), value) for name, value in plain.items()})


def _read(kind: Any, value: Any) -> Any:
    if value is None:
        return None
    if isinstance(kind, types.UnionType):
        return _read(next(one for one in typing.get_args(kind) if one is not type(None)), value)
    if typing.get_origin(kind) is tuple:
        return tuple(_read(typing.get_args(kind)[0], one) for one in value)
    if dataclasses.is_dataclass(kind) and isinstance(kind, type):
        return fact_of(kind, value)
    return dt.date.fromisoformat(value) if kind is dt.date else value
