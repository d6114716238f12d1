"""What nights computed: rolling windows and daily evidence.

Each table holds the current rows only; a row that a later night replaces moves to the table's history,
so reading stays fast and nothing is deleted. Texts that repeat are kept once, in the table ``label``.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from datetime import date, datetime
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from rhovane.model import RhovaneError
from rhovane.store.clock import naive_utc, seconds_of
from rhovane.store.session import Session

WINDOW_COLUMNS = (
    "pair_key",
    "window_end",
    "lag",
    "statistic",
    "n_pairs",
    "coverage",
    "n_effective",
    "p_value",
    "low",
    "high",
    "reason",
)
LATER_COLUMNS = ("later_minus_2", "later_minus_1", "later_0", "later_plus_1", "later_plus_2")
_SCORE_COLUMNS = (
    "innovation",
    "innovation_hours",
    "shape",
    "shape_hours",
    "course",
    "course_hours",
    *LATER_COLUMNS,
)
EVIDENCE_COLUMNS = ("pair_key", "recipe_hash", "day", *_SCORE_COLUMNS)


class _Table(NamedTuple):
    """A table of current rows, with its key and the staged columns in table order."""

    name: str
    key: tuple[str, ...]
    columns: tuple[str, ...]


_WINDOWS = _Table(
    "window_result",
    ("pair", "window_end", "lag"),
    ("pair", "window_end", *WINDOW_COLUMNS[2:-1], "reason"),
)
_EVIDENCE = _Table(
    "evidence",
    ("pair", "recipe", "day"),
    ("pair", "recipe", "day", *_SCORE_COLUMNS),
)


_LABELS = "select text, id from label order by id"


class Results(Session):
    """Writing and reading of what nights computed."""

    def write_windows(self, night_id: int, columns: Mapping[str, Any]) -> None:
        """Keep window results of a night; they replace earlier ones of the same pair, window and lag.

        Parameters
        ----------
        columns : the WINDOW_COLUMNS by name, each one array of equal length, or one value for all rows.
            ``pair_key`` str; ``window_end`` start of the window's last interval, whole seconds since 1970 UTC
            or datetime64; ``lag`` and ``n_pairs`` int; ``statistic``, ``coverage``, ``n_effective``,
            ``p_value``, ``low``, ``high`` float, NaN where not computable; ``reason`` str, "" or None where
            there is none.

        Raises
        ------
        RhovaneError
            A column is missing, unknown or of another length, or a key occurs twice.
        """
        given = _checked("window results", columns, WINDOW_COLUMNS)
        if not len(given["pair_key"]):
            return
        with self.transaction():
            staged = {
                "pair": self._label_ids(given["pair_key"]),
                "window_end": _moments(given["window_end"]),
                "lag": given["lag"].astype(np.int64),
                "n_pairs": given["n_pairs"].astype(np.int64),
                "reason": self._label_ids(given["reason"]),
            }
            for name in ("statistic", "coverage", "n_effective", "p_value", "low", "high"):
                staged[name] = given[name].astype(np.float64)
            self._replace(_WINDOWS, "window results", night_id, staged)

    def retire_windows(self, night_id: int, pair_keys: Sequence[str]) -> None:
        """Move all current window results of some pairs to the history: their recipe is used no more."""
        with self.transaction():
            where = "pair in (select id from label where text in (select unnest($keys)))"
            values = {"night": int(night_id), "keys": list(pair_keys)}
            self.execute(
                f"insert into window_result_history select *, $night from window_result where {where}", values
            )
            self.execute(f"delete from window_result where {where}", {"keys": list(pair_keys)})

    def read_windows(
        self,
        pair_key: str | None = None,
        start: datetime | None = None,
        end: datetime | None = None,
        lag: int | None = None,
    ) -> dict[str, NDArray[Any]]:
        """Current window results with ``start <= window_end < end``, in order of pair, window end and lag.

        Returns
        -------
        dict of ndarray
            The WINDOW_COLUMNS and ``night_id``: ``window_end`` int64 whole seconds since 1970 UTC, ``reason``
            object (None where there is none), numbers NaN where not computable.
        """
        where: list[str] = []
        values: dict[str, Any] = {}
        if pair_key is not None:
            where.append("pair in (select id from label where text = $pair)")
            values["pair"] = pair_key
        if start is not None:
            where.append("window_end >= $start")
            values["start"] = naive_utc(start)
        if end is not None:
            where.append("window_end < $end")
            values["end"] = naive_utc(end)
        if lag is not None:
            where.append("lag = $lag")
            values["lag"] = int(lag)
        names = ", ".join((*_WINDOWS.columns, "night_id"))
        found = self.columns(f"select {names} from window_result{_conditions(where)}", values)
        labels = self._labels()
        found["window_end"] = seconds_of(found["window_end"])
        found = _in_order(found, _rank(labels, found["pair"]), found["window_end"], found["lag"])
        return {
            "pair_key": labels[found.pop("pair")],
            "reason": np.array([text or None for text in labels], dtype=object)[found.pop("reason")],
            **found,
        }

    def write_evidence(self, night_id: int, columns: Mapping[str, Any]) -> None:
        """Keep daily evidence of a night; it replaces earlier of the same pair, recipe and day.

        Parameters
        ----------
        columns : the EVIDENCE_COLUMNS by name, each one array of equal length, or one value for all rows.
            ``pair_key``, ``recipe_hash`` str; ``day`` date or datetime64; ``innovation``, ``shape`` and ``course`` the
            day's scores (atanh of a correlation), NaN where there is none, with their joint ``…_hours``; the
            ``later_…`` the innovation correlation with the second series that many hours later.

        Raises
        ------
        RhovaneError
            A column is missing, unknown or of another length, or a key occurs twice.
        """
        given = _checked("evidence", columns, EVIDENCE_COLUMNS)
        if not len(given["pair_key"]):
            return
        with self.transaction():
            staged = {
                "pair": self._label_ids(given["pair_key"]),
                "recipe": self._label_ids(given["recipe_hash"]),
                "day": given["day"].astype("datetime64[D]").astype("datetime64[us]"),
                **{name: given[name].astype(np.float64) for name in _SCORE_COLUMNS},
            }
            self._replace(_EVIDENCE, "evidence", night_id, staged)

    def read_evidence(
        self,
        *,
        pair_keys: Sequence[str] | None = None,
        recipe_hashes: Sequence[str] | None = None,
        start: date | None = None,
        end: date | None = None,
    ) -> dict[str, NDArray[Any]]:
        """Current evidence with ``start <= day < end``, in order of pair, recipe and day.

        Returns
        -------
        dict of ndarray
            The EVIDENCE_COLUMNS and ``night_id``; ``day`` is datetime64[D]. A filter of None keeps everything;
            an empty list keeps nothing.
        """
        where: list[str] = []
        values: dict[str, Any] = {}
        for column, name, texts in (("pair", "pairs", pair_keys), ("recipe", "recipes", recipe_hashes)):
            if texts is not None:
                where.append(f"{column} in (select id from label where text in (select unnest(${name})))")
                values[name] = list(texts)
        if start is not None:
            where.append("day >= $start")
            values["start"] = start
        if end is not None:
            where.append("day < $end")
            values["end"] = end
        names = ", ".join((*_EVIDENCE.columns, "night_id"))
        found = self.columns(f"select {names} from evidence{_conditions(where)}", values)
        labels = self._labels()
        found["day"] = found["day"].astype("datetime64[D]")
        words = (_rank(labels, found[name]) for name in ("pair", "recipe"))
        found = _in_order(found, *words, found["day"].astype(np.int64))
        return {
            "pair_key": labels[found.pop("pair")],
            "recipe_hash": labels[found.pop("recipe")],
            **found,
        }

    # -- shared by both ----------------------------------------------------------------------------

    def _replace(self, table: _Table, what: str, night_id: int, staged: Mapping[str, NDArray[Any]]) -> None:
        """Insert staged rows as current; rows of the same key move to the history."""
        same = " and ".join(f"old.{name} = staged.{name}" for name in table.key)
        repeated = _repeated_keys([staged[name] for name in table.key])
        if repeated:
            raise RhovaneError(
                f"{repeated} keys ({', '.join(table.key)}) occur more than once among the {what} of night {night_id}; "
                "each may occur once. Nothing was kept."
            )
        night = [int(night_id)]
        moved = self.rows(
            f"insert into {table.name}_history select old.*, ? from {table.name} old semi join staged on {same}",
            night,
            staged,
        )
        if moved[0][0]:
            self.execute(f"delete from {table.name} old using staged where {same}", staged=staged)
        self.execute(
            f"insert into {table.name} select {', '.join(table.columns)}, ? from staged", night, staged
        )

    def _label_ids(self, texts: NDArray[Any]) -> NDArray[np.int32]:
        """The number of each text; texts not met before get one."""
        words = _texts(texts)
        ids = self.remembered(_LABELS)
        fresh = sorted(set(words) - ids.keys())
        if fresh:
            numbers = np.arange(len(ids), len(ids) + len(fresh), dtype=np.int32)
            self.execute(
                "insert into label select id, text from staged",
                staged={"id": numbers, "text": np.array(fresh, dtype=object)},
            )
            ids.update(zip(fresh, numbers.tolist(), strict=True))
        return np.fromiter((ids[word] for word in words), np.int32, len(words))

    def _labels(self) -> NDArray[np.object_]:
        """All texts, each at the index that is its number."""
        return np.array(list(self.remembered(_LABELS)), dtype=object)


def _checked(what: str, columns: Mapping[str, Any], expected: Sequence[str]) -> dict[str, NDArray[Any]]:
    """The columns as arrays of one length."""
    missing = [name for name in expected if name not in columns]
    unknown = [name for name in columns if name not in expected]
    if missing or unknown:
        raise RhovaneError(
            f"Columns of {what}: missing {missing or 'none'}, not known {unknown or 'none'}; "
            f"expected are {', '.join(expected)}."
        )
    arrays = {name: _array(columns[name]) for name in expected}
    lengths = {name: len(a) for name, a in arrays.items() if a.ndim}
    if len(set(lengths.values())) != 1:
        raise RhovaneError(f"Columns of {what} have different lengths: {lengths}; give arrays of one length.")
    n = next(iter(lengths.values()))
    return {name: a if a.ndim else np.broadcast_to(a, n) for name, a in arrays.items()}


def _repeated_keys(keys: Sequence[NDArray[Any]]) -> int:
    """How many rows have the same key as another row before them."""
    order = np.lexsort(keys[::-1])
    same = np.ones(max(0, len(order) - 1), dtype=bool)
    for key in keys:
        ordered = key[order]
        same &= ordered[1:] == ordered[:-1]
    return int(same.sum())


def _array(values: Any) -> NDArray[Any]:
    if values is None or isinstance(values, str):
        return np.array(values, dtype=object)
    array = np.asarray(values)
    return array.astype(object) if array.dtype.kind in "UT" else array


def _texts(values: NDArray[Any]) -> NDArray[np.object_]:
    """Texts as an object array of str only; None becomes ""."""
    out = np.empty(len(values), dtype=object)
    out[:] = ["" if text is None else str(text) for text in values.tolist()]
    return out


def _moments(values: NDArray[Any]) -> NDArray[np.datetime64]:
    seconds = values if values.dtype.kind == "M" else values.astype(np.int64).astype("datetime64[s]")
    return seconds.astype("datetime64[us]")


def _rank(labels: NDArray[np.object_], numbers: NDArray[np.int32]) -> NDArray[np.intp]:
    """Where each label stands in alphabetical order."""
    rank = np.empty(len(labels), np.intp)
    rank[np.argsort(labels, kind="stable")] = np.arange(len(labels))
    return rank[numbers]


def _in_order(found: dict[str, NDArray[Any]], *keys: NDArray[np.integer]) -> dict[str, NDArray[Any]]:
    """The rows sorted by whole numbers, the first key first; rows in order already are left alone."""
    place = np.zeros(len(keys[0]), np.int64)
    for key in keys:
        if len(key):
            place = place * (int(key.max()) - int(key.min()) + 1) + (key - key.min())
    if not (np.diff(place) < 0).any():
        return found
    order = np.argsort(place, kind="stable")
    return {name: column[order] for name, column in found.items()}


def _conditions(where: Sequence[str]) -> str:
    return f" where {' and '.join(where)}" if where else ""
