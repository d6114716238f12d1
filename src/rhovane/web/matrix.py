"""The watched pairs laid out as tables: one block for each two quantities, stations down and across."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from rhovane.review import PairNow

SHADES = ((0.3, 1), (0.6, 2), (2.0, 3))  # up to this size: shade


@dataclass(frozen=True)
class Block:
    """One table: rows are first series, columns second ones; ``cells`` holds the pairs of each place."""

    title: str
    rows: tuple[str, ...]
    columns: tuple[str, ...]
    cells: dict[tuple[str, str], list[PairNow]]


def matrix_blocks(pairs: Sequence[PairNow]) -> list[Block]:
    """The pairs by their two quantities, in the order of the settings."""
    groups: dict[tuple[str, str], list[PairNow]] = {}
    for pair in pairs:
        sides = (pair.recipe.first, pair.recipe.second)
        groups.setdefault((sides[0].partition(".")[2], sides[1].partition(".")[2]), []).append(pair)
    blocks = []
    for (first, second), members in groups.items():
        cells: dict[tuple[str, str], list[PairNow]] = {}
        for pair in members:
            cells.setdefault((pair.recipe.first, pair.recipe.second), []).append(pair)
        rows = tuple(dict.fromkeys(row for row, _ in cells))
        columns = tuple(dict.fromkeys(column for _, column in cells))
        blocks.append(Block(f"{first} with {second}", rows, columns, cells))
    return blocks


def shade_class(value: float | None) -> str:
    """The style class of a correlation: s1 to s3 above zero, n1 to n3 below, none without one."""
    if value is None:
        return ""
    step = next(shade for limit, shade in SHADES if abs(value) <= limit)
    return f"{'s' if value >= 0 else 'n'}{step}"
