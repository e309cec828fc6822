"""The rate along the way of one isothermal case: what :mod:`core.reactors.one_reaction.path` has for many.

With one case every coefficient is a float and every question of which column
does what is settled once, so that a rate takes a third of the time that arrays
over cases take. The formulas are those of the path, and a test holds the two
equal.
"""

from __future__ import annotations

import math

import numpy as np

from core.arrays import FloatArray
from core.rates.power_product import PowerProduct
from core.rates.rate_law import Hindrance

_Column = tuple[float, float, float]
"""Amount at the feed, its change to the limit, amount there."""


class SingleCase:
    """Rates of one case whose temperature stays and whose law has no floors.

    Parameters
    ----------
    start, change, end : list of float, length S + 2
        Of each column of the account.
    ln_concentration : float
        ln C_A0.
    ln_effectiveness : float
        Of a pellet; zero without one.
    rate, opposing, hindrances
        As of the path, of one case.
    at_equilibrium : bool
        Whether equilibrium is the limit.
    """

    def __init__(
        self,
        columns: tuple[list[float], list[float], list[float]],
        ln_concentration: float,
        ln_effectiveness: float,
        rate: PowerProduct,
        opposing: PowerProduct | None,
        hindrances: tuple[Hindrance, ...],
        *,
        at_equilibrium: bool,
    ) -> None:
        self.columns: list[_Column] = list(zip(*columns, strict=True))
        self.ln_concentration = ln_concentration
        self.fixed, self.powers = self._settled(rate)
        self.fixed += ln_effectiveness
        self.at_equilibrium = at_equilibrium
        self.opposing = None if opposing is None else self._settled(opposing)
        self.hindrances = [
            (
                float(hindrance.leading[0]),
                [self._settled(term) for term in hindrance.terms],
                float(hindrance.power[0]),
            )
            for hindrance in hindrances
        ]

    def _settled(self, product: PowerProduct) -> tuple[float, list[tuple[float, int]]]:
        """Return the constant part of a logarithm, and the powers of the columns that change."""
        exponents = product.exponents[0].tolist()
        total = math.fsum(exponents)
        fixed = float(product.ln_factor[0]) + total * self.ln_concentration
        powers = [(p, j) for j, p in enumerate(exponents) if p]
        last = len(self.columns) - 1
        if self.columns[last][1] and total:
            powers.append((-total, last))
        moving = []
        for power, j in powers:
            start, change, _ = self.columns[j]
            if change:
                moving.append((power, j))
            else:
                fixed += power * (math.log(start) if start > 0 else -math.inf)
        return fixed, moving

    def ln_rate(
        self, gone: FloatArray, left: FloatArray, ln_left: FloatArray
    ) -> tuple[FloatArray, FloatArray | float]:
        """Return the logarithm of the rate along the way, and the share that is left of it.

        Parameters and results of one shape; see
        :meth:`core.reactors.path.ReactionPath.ln_rate`.
        """
        known: dict[int, FloatArray] = {}

        def ln(j: int) -> FloatArray:
            found = known.get(j)
            if found is None:
                start, change, end = self.columns[j]
                if change < 0 and end == 0:
                    found = ln_left + math.log(-change)
                else:
                    amount = end - change * left if change < 0 else start + change * gone
                    found = np.log(amount)
                known[j] = found
            return found

        def of(settled: tuple[float, list[tuple[float, int]]]) -> FloatArray | float:
            total: FloatArray | float = settled[0]
            for power, j in settled[1]:
                total = total + (ln(j) if power == 1 else power * ln(j))
            return total

        along = of((self.fixed, self.powers))
        for leading, terms, power in self.hindrances:
            below: FloatArray | float = leading
            for term in terms:
                below = below + np.exp(of(term))
            along = along - power * np.log(below)
        along = np.asarray(along)
        if self.opposing is None:
            return along, 1.0
        if self.at_equilibrium:
            return along, -np.expm1(self._from_limit(gone, left))
        against = of(self.opposing)
        # Substances of both sides are absent: the one rate is as zero as the other.
        return along, -np.expm1(np.where(np.isnan(against), 0.0, against))

    def _from_limit(self, gone: FloatArray, left: FloatArray) -> FloatArray | float:
        """Return the logarithm of the opposing over the driving rate, from its zero at the end."""
        assert self.opposing is not None
        total: FloatArray | float = 0.0
        for power, j in self.opposing[1]:
            start, change, end = self.columns[j]
            near = np.log1p((-change / end) * left)
            if change > 0:
                near = np.where(gone < 0.5, np.log((start + change * gone) / end), near)
            total = total + (near if power == 1 else power * near)
        return total
