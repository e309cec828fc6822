"""Where a question has no direct answer: looked for over a range, then bracketed."""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeVar

import numpy as np
from scipy.optimize import brentq

from core.arrays import FloatArray
from core.errors import Refused

_T = TypeVar("_T")

SIZES: FloatArray = np.logspace(-4, 6, 31)
"""Over what the inlet's rates suggest."""
_TIGHT = 1e-12
_LEAPS = 1e-6
"""Of what a function differed by at the ends of a bracket: what is left at a root, where it
does not leap."""


def first_size(at: Callable[[float], tuple[float, _T]], scale: float) -> _T | None:
    """Return what belongs to the smallest size at which a function crosses zero; None if none.

    Parameters
    ----------
    at : callable
        The function at a size, and what belongs to it; may refuse.
    scale : float
        The size around which is looked.

    Raises
    ------
    Refused
        ``compute-budget``; what every size was refused for.
    """
    seen: list[tuple[float, float]] = []
    refusal: Refused | None = None
    for ratio in SIZES.tolist():
        size = scale * ratio
        try:
            value, found = at(size)
        except Refused as refused:
            if refused.faults[0].code == "compute-budget":
                raise
            refusal = refused
            continue
        if value == 0:
            return found
        if seen and seen[-1][1] * value < 0:
            root = bracketed(at, seen[-1], (size, value), logarithmic=True)
            if root is not None:
                return root[1]
        seen.append((size, value))
    if not seen and refusal is not None:
        raise refusal
    return None


def bracketed(
    at: Callable[[float], tuple[float, _T]],
    low: tuple[float, float],
    high: tuple[float, float],
    *,
    logarithmic: bool = False,
) -> tuple[float, _T] | None:
    """Return where a function crosses zero between two places, and what belongs to it.

    Parameters
    ----------
    at : callable
    low, high : (float, float)
        Places, and the function there, of opposite signs.
    logarithmic : bool
        Whether to halve the logarithm of the place.

    Returns
    -------
    (float, object) or None
        None where the function leaps across zero, or is not there.
    """
    known: dict[float, tuple[float, _T]] = {}

    def there(u: float) -> float:
        x = float(np.exp(u)) if logarithmic else u
        known[u] = at(x)
        return known[u][0]

    def known_or_there(u: float) -> float:
        return values[u] if u in values else there(u)

    ends = [float(np.log(x)) if logarithmic else x for x, _ in (low, high)]
    values = dict(zip(ends, (low[1], high[1]), strict=True))
    try:
        root = float(brentq(known_or_there, ends[0], ends[1], xtol=_TIGHT, rtol=1e-14))
        if root not in known:
            there(root)
    except Refused as refused:
        if refused.faults[0].code == "compute-budget":
            raise
        return None
    value, found = known[root]
    if abs(value) > _LEAPS * (abs(low[1]) + abs(high[1])):
        return None
    return (float(np.exp(root)) if logarithmic else root), found
