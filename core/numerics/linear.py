"""Linear systems, many small ones at a time."""

from __future__ import annotations

import numpy as np

from core.arrays import FloatArray


def solve_stack(matrices: FloatArray, right: FloatArray) -> FloatArray:
    """Solve a stack of systems (N, k, k) for (N, k, r); NaN where one is singular.

    A singular matrix makes the stacked solver give up on all of them: the
    stack is halved until it stands alone.
    """
    try:
        return np.asarray(np.linalg.solve(matrices, right), dtype=float)
    except np.linalg.LinAlgError:
        if len(matrices) == 1:
            return np.full_like(right, np.nan)
        half = len(matrices) // 2
        return np.concatenate(
            [
                solve_stack(matrices[:half], right[:half]),
                solve_stack(matrices[half:], right[half:]),
            ]
        )


_MANY, _SMALL = 64, 8


def solve_definite(matrices: FloatArray, right: FloatArray) -> FloatArray:
    """Solve a stack of systems (N, k, k) for (N, k); not finite where one is singular.

    Each matrix is symmetric and positive definite but for positive factors of its
    columns, so that elimination needs no pivots (N. J. Higham, Accuracy and Stability of
    Numerical Algorithms, 2nd ed., SIAM, 2002, ch. 10). Of many small ones each step is taken in
    all of them at once, several times as fast as one after the other.
    """
    count, k = right.shape
    if count < _MANY or k > _SMALL:
        return solve_stack(matrices, right[:, :, None])[:, :, 0]
    a = np.array(matrices.transpose(1, 2, 0), order="C")
    x = np.array(right.T, order="C")
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        for p in range(k):
            for i in range(p + 1, k):
                factor = a[i, p] / a[p, p]
                for j in range(p + 1, k):
                    a[i, j] -= factor * a[p, j]
                x[i] -= factor * x[p]
        for p in range(k - 1, -1, -1):
            for j in range(p + 1, k):
                x[p] -= a[p, j] * x[j]
            x[p] /= a[p, p]
    return np.ascontiguousarray(x.T)
