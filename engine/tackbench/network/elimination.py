"""Gaussian elimination, twice: exact ranks of connection matrices, and pivoted solution of scaled equations."""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache

import numpy as np

_WHOLE_NUMBER_ZERO = 1e-9


def row_echelon(matrix: np.ndarray, order: Sequence[int] | None = None) -> tuple[np.ndarray, list[int]]:
    """Reduced row echelon form of a matrix of small whole numbers and ratios, and its pivot columns.

    ``order`` is the order in which columns are tried as pivots. Rows without a pivot are dropped. Connections stay
    when a pot is turned, so what was found for a matrix is kept.
    """
    whole = np.ascontiguousarray(matrix, dtype=float)
    columns = tuple(range(whole.shape[1]) if order is None else order)
    reduced, pivots = _row_echelon(whole.tobytes(), whole.shape[0], whole.shape[1], columns)
    return reduced, list(pivots)


@lru_cache(maxsize=512)
def _row_echelon(content: bytes, rows: int, columns: int, order: tuple[int, ...]) -> tuple[np.ndarray, list[int]]:
    work = np.frombuffer(content, dtype=float).reshape(rows, columns).copy()
    pivots: list[int] = []
    row = 0
    for column in order:
        if row == work.shape[0]:
            break
        best = row + int(np.argmax(np.abs(work[row:, column])))
        if abs(work[best, column]) <= _WHOLE_NUMBER_ZERO:
            continue
        work[[row, best]] = work[[best, row]]
        work[row] /= work[row, column]
        factors = work[:, column].copy()
        factors[row] = 0.0
        work -= np.outer(factors, work[row])
        work[np.abs(work) <= _WHOLE_NUMBER_ZERO] = 0.0
        pivots.append(column)
        row += 1
    work.setflags(write=False)
    return work[:row], pivots


def null_space(matrix: np.ndarray) -> np.ndarray:
    """Columns that span the null space of a matrix of small whole numbers, shape (columns, dimension)."""
    reduced, pivots = row_echelon(matrix)
    columns = matrix.shape[1]
    free = [column for column in range(columns) if column not in pivots]
    basis = np.zeros((columns, len(free)))
    for number, column in enumerate(free):
        basis[column, number] = 1.0
        basis[pivots, number] = -reduced[:, column]
    return basis


def eliminate(
    rows: np.ndarray, unknowns: int, preferred: int, units: np.ndarray, smallest: float
) -> tuple[np.ndarray, np.ndarray, list[int]]:
    """Solve as many of the first ``unknowns`` columns as there are, from rows that each say "sum of terms = 0".

    Pivots are sought first among the ``preferred`` first rows, as long as one is larger than ``smallest`` times its
    row's largest term (a term being coefficient times the column's unit); a node that hangs on almost nothing is so
    left to the other rows, which take a control voltage as known, and no huge impedance ever appears.
    Returns the solved columns in terms of the remaining ones, shape (unknowns, rest); the rows left over, scaled to a
    largest term of one; and the unknowns that no row determines (they are set to zero).
    """
    work = np.array(rows, dtype=float)
    size = np.max(np.abs(work) * units, axis=1)
    size[size == 0.0] = 1.0
    work /= size[:, None]
    open_rows, open_columns = list(range(work.shape[0])), list(range(unknowns))
    pivots: list[tuple[int, int]] = []
    for last, limit in ((preferred, smallest), (work.shape[0], smallest), (work.shape[0], 1e-15)):
        while open_columns:
            candidates = [row for row in open_rows if row < last]
            if not candidates:
                break
            block = np.abs(work[np.ix_(candidates, open_columns)]) * units[open_columns]
            flat = int(np.argmax(block))
            row, column = candidates[flat // len(open_columns)], open_columns[flat % len(open_columns)]
            if block.flat[flat] < limit:
                break
            factors = work[open_rows, column] / work[row, column]
            factors[open_rows.index(row)] = 0.0
            work[open_rows] -= np.outer(factors, work[row])
            work[[other for other in open_rows if other != row], column] = 0.0
            pivots.append((row, column))
            open_rows.remove(row)
            open_columns.remove(column)
    solved = np.zeros((unknowns, work.shape[1] - unknowns))
    for row, column in reversed(pivots):
        later = work[row, :unknowns].copy()
        later[column] = 0.0
        solved[column] = -(work[row, unknowns:] + later @ solved) / work[row, column]
    rest = work[open_rows, unknowns:]
    largest = np.max(np.abs(rest) * units[unknowns:], axis=1, initial=0.0)
    kept = largest > 1e-13
    return solved, rest[kept] / largest[kept, None], open_columns
