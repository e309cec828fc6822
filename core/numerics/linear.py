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
