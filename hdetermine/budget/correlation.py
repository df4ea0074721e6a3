"""Correlation matrices: validation, groups of correlated inputs, square root."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from hdetermine.errors import InputError

FloatArray = NDArray[np.float64]

# Products of measured standard deviations leave a few rounding errors in a correlation.
_TOLERANCE = 1e-9


def checked_correlation(
    correlation: FloatArray | None, size: int, names: Sequence[str] = ()
) -> FloatArray:
    """Return a valid correlation matrix; the unit matrix for None.

    Parameters
    ----------
    correlation : ndarray, shape (size, size), or None
        Matrix to check.
    size : int
        Number of inputs.
    names : sequence of str
        Names of the inputs, for the message.

    Returns
    -------
    ndarray, shape (size, size)
        Exactly symmetric, with an exactly unit diagonal.

    Raises
    ------
    InputError
        If the matrix has the wrong shape, is not finite, not symmetric, has no unit diagonal,
        an element beyond one, or is not positive semi-definite.
    """
    if correlation is None:
        return np.eye(size)
    matrix = np.asarray(correlation, dtype=float)
    if matrix.shape != (size, size):
        raise InputError(
            f"The correlation matrix has the shape {matrix.shape}; {size} inputs need "
            f"({size}, {size})."
        )
    if not np.all(np.isfinite(matrix)):
        raise InputError("The correlation matrix has elements that are not finite; state them all.")
    excess = np.abs(matrix - matrix.T)
    if excess.max(initial=0.0) > _TOLERANCE:
        pair = _pair(names, excess)
        raise InputError(
            f"The correlation matrix is not symmetric{pair}; r(i,j) must equal r(j,i)."
        )
    if np.abs(np.diag(matrix) - 1.0).max(initial=0.0) > _TOLERANCE:
        raise InputError("The correlation matrix needs ones on its diagonal.")
    if np.abs(matrix).max(initial=0.0) > 1.0 + _TOLERANCE:
        pair = _pair(names, np.abs(matrix))
        raise InputError(f"A correlation is beyond one{pair}; it must lie between -1 and 1.")
    matrix = np.asarray(np.clip(0.5 * (matrix + matrix.T), -1.0, 1.0))
    np.fill_diagonal(matrix, 1.0)
    joined = np.flatnonzero(np.count_nonzero(matrix, axis=1) > 1)
    inner = matrix[np.ix_(joined, joined)]
    if joined.size and np.linalg.eigvalsh(inner)[0] < -_TOLERANCE * size:
        raise InputError(
            "The correlation matrix is not positive semi-definite, so no quantities can have it; "
            "check the correlations against each other."
        )
    return matrix


def _pair(names: Sequence[str], size: FloatArray) -> str:
    """Name the pair of inputs with the largest element."""
    row, column = np.unravel_index(int(np.argmax(size)), size.shape)
    if not names:
        return ""
    return f" for {names[int(row)]} and {names[int(column)]}"


def correlated_groups(correlation: FloatArray) -> list[list[int]]:
    """Split inputs into groups that are independent of each other.

    Parameters
    ----------
    correlation : ndarray, shape (m, m)
        Valid correlation matrix.

    Returns
    -------
    list of list of int
        Indices, in order; an input without correlations is a group of one.
    """
    groups: list[list[int]] = []
    seen: set[int] = set()
    for start in range(len(correlation)):
        if start in seen:
            continue
        group, waiting = {start}, [start]
        while waiting:
            linked = set(np.flatnonzero(correlation[waiting.pop()]).tolist()) - group
            group |= linked
            waiting += linked
        seen |= group
        groups.append(sorted(group))
    return groups


def square_root(matrix: FloatArray) -> FloatArray:
    """Return the symmetric L with L L = matrix, for a positive semi-definite matrix.

    Inputs without correlations keep a column of their own.
    """
    values, vectors = np.linalg.eigh(matrix)
    return np.asarray((vectors * np.sqrt(np.clip(values, 0.0, None))) @ vectors.T)
