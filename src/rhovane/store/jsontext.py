"""One spelling of structured facts, so that equal facts have equal text and equal hashes."""

from __future__ import annotations

import datetime as dt
import json
from typing import Any

import numpy as np

from rhovane.model import RhovaneError


def json_text(facts: Any) -> str:
    """Facts as JSON with sorted keys and no spaces; numpy scalars and arrays as plain numbers and lists.

    Raises
    ------
    RhovaneError
        The facts hold something JSON cannot say, such as NaN or a set.
    """
    try:
        return json.dumps(
            facts, sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False, default=_plain
        )
    except (TypeError, ValueError) as error:
        raise RhovaneError(
            f"These facts cannot be written as JSON ({error}); use text, finite numbers, true, false, null, lists and "
            f"tables only: {facts!r:.300}"
        ) from error


def _plain(thing: Any) -> Any:
    if isinstance(thing, np.generic):
        return thing.item()
    if isinstance(thing, np.ndarray):
        return thing.tolist()
    if isinstance(thing, dt.date | dt.datetime):
        return thing.isoformat()
    raise TypeError(f"{type(thing).__name__} has no JSON form")
