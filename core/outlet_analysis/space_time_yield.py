"""What a reactor makes by its size and time: moles of product per volume, or catalyst, and time.

Of a flow (F_P - F_P0)/V, of a batch (N_P - N_P0)/(V t), with V the volume of the
reactor or the mass of its catalyst (common practice; moles of the product itself,
whatever yields count by).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from core.errors import Fact, Note
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.monte_carlo import Draws
from core.outlet_analysis.ratios import NEAR_ZERO, Uncertain, forms_of
from core.streams.metered import Measurement

SizeBasis = Literal["reactor-volume", "catalyst-mass"]


@dataclass(frozen=True)
class ReactorSize:
    """Size of a reactor, m3 or kg of catalyst, and of a batch the time that it took, s."""

    basis: SizeBasis
    size: Measurement
    time: Measurement | None = None


@dataclass(frozen=True, eq=False)
class SpaceTimeYields:
    """Space-time yields of the P products; not a number where there is none.

    Attributes
    ----------
    basis : SizeBasis
    products : tuple of int, length P
    values : Uncertain, shape (..., P)
        mol/(m3 s) or mol/(kg s).
    notes : tuple of Note
    """

    basis: SizeBasis
    products: tuple[int, ...]
    values: Uncertain
    notes: tuple[Note, ...]


def space_time_yields(
    found: Estimate, products: tuple[int, ...], size: ReactorSize, draws: Draws | None = None
) -> SpaceTimeYields:
    """Return what the account of a single sample makes of each product by the reactor's size.

    The uncertainties of account, size and time are independent of each other.
    With ``draws`` size and time are drawn beside them.
    """
    account = found.account
    made = (account.outlet_map - account.feed_map)[list(products)]
    of = forms_of(found.z, found.covariance, made)
    divisors = [part for part in (size.size, size.time) if part is not None]
    per = float(np.prod([part.value for part in divisors]))
    share = float(np.sqrt(sum((part.u / part.value) ** 2 for part in divisors)))
    value = of.value / per
    values = Uncertain(value, np.sqrt((of.u / per) ** 2 + (value * share) ** 2))
    if draws is not None:
        below = draws.beside(divisors)[:, None]
        values = draws.quotient(value, np.array([per]), draws.z @ made.T, below)
    notes = [
        Note(
            "denominator-near-zero",
            "no space-time yield is given: the size or the time that it counts by is within twice"
            " its uncertainty of zero",
            subject=part.subject,
        )
        for part in divisors
        if part.value <= NEAR_ZERO * part.u
    ]
    if found.per_mole_of_key:
        key: dict[str, Fact] = {"key": account.problem.reactions.names[account.problem.key]}
        notes.append(
            Note(
                "space-time-yield-needs-flow",
                "no space-time yield is given: no reading tells how much flows, and the account is"
                " kept per mole of {key}; state a flow",
                subject=("reactor",),
                facts=key,
            )
        )
    if notes:
        values = values.where(np.zeros(value.shape, dtype=bool))
    return SpaceTimeYields(size.basis, products, values, tuple(notes))
