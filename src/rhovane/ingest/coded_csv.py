"""Large plain CSV files: every column as its distinct cells, cut and counted in one compiled pass over the bytes.

What a cell means is decided elsewhere, once for each distinct cell; this only saves making a text of every cell.
Files with quotes, NUL bytes or bare carriage returns are left to :mod:`rhovane.ingest.csv_table`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numba import njit
from numpy.typing import NDArray

# Distinct cells of a column, tried one after the other: a small table stays in the processor's cache. Beyond
# the last the other way is taken. A hash table has twice as many places, so that searches stay short.
MOST_DISTINCT = (1 << 15, 1 << 20)
FNV_OFFSET, FNV_PRIME = 0x811C9DC5, 0x01000193  # FNV-1a, 32 bits: Fowler, Noll and Vo (RFC 9923)
LINE_END = 10


@dataclass(frozen=True)
class CodedCells(Sequence[str]):
    """A column of texts: row i holds ``cells[index[i]]``."""

    cells: list[str]
    index: NDArray[np.int64]

    def __len__(self) -> int:
        return len(self.index)

    def __getitem__(self, row: int) -> str:  # type: ignore[override]
        return self.cells[self.index[row]]


@dataclass(frozen=True)
class CodedRows:
    """The rows of a body of lines: ``column(j)`` of the good ones; ``bad`` numbers lines of another width.

    ``line`` numbers the lines of the good rows, from 0.
    """

    body: bytes
    encoding: str
    codes: NDArray[np.int32]
    first: NDArray[np.int64]
    length: NDArray[np.int64]
    n_distinct: NDArray[np.int64]
    begin: NDArray[np.int64]
    line: NDArray[np.int64]
    bad: NDArray[np.int64]

    def column(self, j: int) -> CodedCells:
        """The cells of a column, one a good row."""
        n = int(self.n_distinct[j])
        places = zip(self.first[j, :n].tolist(), self.length[j, :n].tolist(), strict=True)
        cells = [self._decode(self.body[at : at + size]) for at, size in places]
        return CodedCells(cells, self.codes[j].astype(np.int64))

    def text_of(self, line: int) -> str:
        """A line as it stands."""
        at = int(self.begin[line])
        end = self.body.find(b"\n", at)
        return self._decode(self.body[at : end if end >= 0 else len(self.body)])

    def _decode(self, cell: bytes) -> str:
        return cell.decode(self.encoding, "surrogateescape")


def code_rows(body: bytes, *, delimiter: str, width: int, encoding: str) -> CodedRows | None:
    """The lines of a body as rows of coded cells; None if it needs the other way.

    Parameters
    ----------
    body : bytes
        Lines that end with LF; the last may lack its end.
    delimiter : str
        One ASCII character.
    width : int
        Columns of a row.
    encoding : str
        "utf-8" or "latin-1".
    """
    n_lines = body.count(b"\n") + (not body.endswith(b"\n"))
    data = np.frombuffer(body, dtype=np.uint8)
    codes = np.empty((width, n_lines), dtype=np.int32)
    begin = np.empty(n_lines, dtype=np.int64)
    good = np.empty(n_lines, dtype=np.bool_)
    for most in MOST_DISTINCT:
        most = min(most, 1 << n_lines.bit_length())  # a short file of many columns needs little room
        first = np.zeros((width, most), dtype=np.int64)
        length = np.zeros((width, most), dtype=np.int64)
        n_distinct = np.zeros(width, dtype=np.int64)
        table = np.full((width, 2 * most), -1, dtype=np.int32)
        if _code_cells(data, ord(delimiter), table, first, length, n_distinct, codes, begin, good):
            break
    else:
        return None
    line = np.flatnonzero(good)
    if len(line) < n_lines:
        codes = codes[:, line]
    return CodedRows(body, encoding, codes, first, length, n_distinct, begin, line, np.flatnonzero(~good))


@njit(cache=True, nogil=True)
def _code_cells(data, delimiter, table, first, length, n_distinct, codes, begin, good):  # type: ignore[no-untyped-def]
    """Fill the outputs of :func:`code_rows`; False when a column has too many distinct cells."""
    width = table.shape[0]
    mask = table.shape[1] - 1
    last = np.full(width, -1, dtype=np.int64)
    n = len(data)
    at = 0
    for row in range(len(begin)):
        begin[row] = at
        # A line of another width must not add its cells to the columns: it is measured first.
        end = at
        fields = 1
        while end < n and data[end] != LINE_END:
            fields += data[end] == delimiter
            end += 1
        good[row] = fields == width
        if fields == width:
            cell = at
            for j in range(width):
                # Most columns of most rows hold what they held in the row before.
                code = last[j]
                if code >= 0:
                    size = length[j, code]
                    stop = cell + size
                    if stop == end if j == width - 1 else stop < end and data[stop] == delimiter:
                        other = first[j, code]
                        k = 0
                        while k < size and data[other + k] == data[cell + k]:
                            k += 1
                        if k == size:
                            codes[j, row] = code
                            cell = stop + 1
                            continue
                h = np.uint32(FNV_OFFSET)
                stop = cell
                while stop < end and data[stop] != delimiter:
                    h = np.uint32((h ^ np.uint32(data[stop])) * np.uint32(FNV_PRIME))
                    stop += 1
                place = np.int64(h ^ (h >> np.uint32(15))) & mask
                code = table[j, place]
                while code >= 0:
                    if length[j, code] == stop - cell:
                        same = True
                        other = first[j, code]
                        for k in range(stop - cell):
                            if data[other + k] != data[cell + k]:
                                same = False
                                break
                        if same:
                            break
                    place = (place + 1) & mask
                    code = table[j, place]
                if code < 0:
                    code = n_distinct[j]
                    if code == first.shape[1]:
                        return False
                    table[j, place] = code
                    first[j, code] = cell
                    length[j, code] = stop - cell
                    n_distinct[j] += 1
                codes[j, row] = code
                last[j] = code
                cell = stop + 1
        at = end + 1
    return True
