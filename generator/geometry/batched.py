"""Small matrices by the thousand: K products, inverses and choices of columns in one call."""

from __future__ import annotations

import numpy as np

from generator.geometry.stack import Floats, Indices


def rows_times(rows: Floats, x: Floats) -> Floats:
    """rows·x for each program: (K, m)."""
    if rows.ndim == 2:
        return np.asarray(x @ rows.T, dtype=np.float64)
    return np.asarray(np.matmul(rows, x[:, :, None])[:, :, 0], dtype=np.float64)


def times_columns(y: Floats, matrix: Floats) -> Floats:
    """yᵀ·matrix for each program: (K, N)."""
    if matrix.ndim == 2:
        return np.asarray(y @ matrix, dtype=np.float64)
    return np.asarray(np.matmul(y[:, None, :], matrix)[:, 0], dtype=np.float64)


def times(matrices: Floats, vectors: Floats) -> Floats:
    """Each matrix (K, m, m) times its vector (K, m)."""
    return np.asarray(np.matmul(matrices, vectors[:, :, None])[:, :, 0], dtype=np.float64)


def inverses(bases: Floats) -> Floats:
    """The inverses of K matrices (K, m, m), NaN where one is singular."""
    try:
        return np.asarray(np.linalg.inv(bases), dtype=np.float64)
    except np.linalg.LinAlgError:
        pass
    found = np.full(bases.shape, np.nan)
    for place, base in enumerate(bases):
        try:
            found[place] = np.linalg.inv(base)
        except np.linalg.LinAlgError:
            continue
    return found


def basis_columns(matrix: Floats, basic: Indices) -> Floats:
    """The basic columns of [rows | −1]: (K, m, m)."""
    if matrix.ndim == 2:
        return np.ascontiguousarray(matrix.T[basic].transpose(0, 2, 1))
    return np.take_along_axis(matrix, basic[:, None, :], axis=2)


def polished(inverse: Floats, bases: Floats) -> Floats:
    """R (2 − B R): doubles the right digits of the inverse."""
    return np.asarray(2.0 * inverse - np.matmul(inverse, np.matmul(bases, inverse)), dtype=np.float64)


def fractions_of_gold(count: int) -> Floats:
    """Fractional parts of the first multiples of the golden ratio: in [0, 1), all different, evenly spread."""
    return np.asarray(np.modf(0.6180339887498949 * np.arange(1, count + 1))[0], dtype=np.float64)
