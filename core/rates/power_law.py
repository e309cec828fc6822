"""Rates by a power law, irreversible or reversible."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.dimensions import DIMENSIONS, Exponents
from core.errors import Fault, Refused, Subject, refuse
from core.rates.constants import TemperatureDependent, Values, finite, ln_in_range, positive
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.power_product import (
    Driving,
    FlooredFactor,
    PowerProduct,
    ln_per_concentration,
    product_of,
)
from core.reactions.reaction_set import ReactionSet
from core.streams.stream import Stream


@dataclass(frozen=True, eq=False)
class ByAffinity:
    """The reverse rate that thermodynamics demands: forward * (Q/K)^m.

    Attributes
    ----------
    equilibrium : EquilibriumConstant
        Of the reaction as written.
    exponent : float
        m, above zero; 1 over the number of times that the rate-determining
        step occurs in the equation as written (J. Horiuti, T. Nakamura, Adv.
        Catal. 17 (1967) 1; M. Boudart, Catal. Lett. 1 (1988) 21).
    """

    equilibrium: EquilibriumConstant
    exponent: Values = 1.0
    one_equilibrium: ClassVar[bool] = True
    """ln Q rises with the extent, so there is one equilibrium at most."""


@dataclass(frozen=True, eq=False)
class ReverseConstant:
    """A reverse rate with its own constant and orders, of the same driving force.

    Attributes
    ----------
    constant : TemperatureDependent
    orders : ndarray, shape (..., S)
    """

    constant: TemperatureDependent
    orders: FloatArray
    one_equilibrium: ClassVar[bool] = False


@dataclass(frozen=True, eq=False)
class PowerLaw:
    """Rate of reaction per volume of fluid, mol/(m3 s), by powers of a driving force.

    Attributes
    ----------
    of : int
        The substance whose rate of consumption or formation the law gives.
    orders : ndarray, shape (..., S)
        Of each substance, -.
    constant : TemperatureDependent
        k, in mol/(m3 s) per driving force to the sum of the orders.
    driving : Driving
    reverse : ByAffinity, ReverseConstant or None
        None: irreversible.
    floors : ndarray, shape (S,), or None
        The driving force (mol/m3, Pa, -) below which a factor of negative
        order stays as it is; 0 where none is stated.
    activity, effectiveness : float or ndarray, shape (...)
        Factors on the net rate, -.
    """

    of: int
    orders: FloatArray
    constant: TemperatureDependent
    driving: Driving = "concentration"
    reverse: ByAffinity | ReverseConstant | None = None
    floors: FloatArray | None = None
    activity: Values = 1.0
    effectiveness: Values = 1.0

    @property
    def needs_temperature(self) -> bool:
        """Whether any of its constants follows temperature."""
        constants = [self.constant]
        if isinstance(self.reverse, ByAffinity):
            constants.append(self.reverse.equilibrium.constant)
        elif self.reverse is not None:
            constants.append(self.reverse.constant)
        return any(constant.needs_temperature for constant in constants)

    def check(self, reactions: ReactionSet, reaction: int, stream: Stream) -> None:
        """Refuse a law that says nothing about this reaction in this stream.

        Raises
        ------
        Refused
            ``rate-of-absent-substance``, ``order-outside-phase``,
            ``driving-needs-gas``, ``floor-without-negative-order``,
            ``impossible-value``.
        """
        subject = rate_subject(reactions, reaction)
        names = reactions.names
        faults: list[Fault] = []
        if reactions.nu[reaction, self.of] == 0:
            faults.append(
                Fault(
                    "rate-of-absent-substance",
                    (*subject, "of"),
                    "the law is said to give the rate of {name}, which the reaction neither "
                    "consumes nor forms; name one of its substances",
                    {"name": names[self.of]},
                )
            )
        if self.driving == "mole-fraction" and stream.solvent_unknown:
            faults.append(
                Fault(
                    "mole-fractions-not-known",
                    (*subject, "driving"),
                    "mole fractions drive the rate, and the liquid is given by concentrations,"
                    " beside which a solvent may be in it: state its density too, or flows of"
                    " everything in it",
                )
            )
        if self.driving == "partial-pressure" and stream.phase != "gas":
            faults.append(
                Fault(
                    "driving-needs-gas",
                    (*subject, "driving"),
                    "partial pressures drive the rate and the feed is a liquid; give the law in "
                    "concentrations or mole fractions",
                )
            )
        for where, orders in self._all_orders(subject):
            finite(orders, where, "order")
            if stream.in_phase.all():
                continue
            outside = _of_any_case(orders != 0) & ~stream.in_phase
            faults.extend(
                Fault(
                    "order-outside-phase",
                    (*where, names[i]),
                    "{name} is not in the {phase}, where the law counts it; leave its order out, "
                    "or put its amount into the constant",
                    {"name": names[i], "phase": stream.phase},
                )
                for i in np.flatnonzero(outside)
            )
        if self.floors is not None:
            faults.extend(self._floor_faults(names, subject))
        if faults:
            raise Refused(faults)

    def _floor_faults(self, names: tuple[str, ...], subject: Subject) -> list[Fault]:
        assert self.floors is not None
        faults = []
        negative = [_of_any_case(orders < 0) for _, orders in self._all_orders(subject)]
        finite(self.floors, (*subject, "floor"), "floor")
        for i in np.flatnonzero(self.floors):
            where: Subject = (*subject, "floor", names[i])
            if not np.any(negative, axis=0)[i]:
                faults.append(
                    Fault(
                        "floor-without-negative-order",
                        where,
                        "a floor was stated for {name}, whose order is not negative: it would "
                        "change nothing; leave it out, or check the order",
                        {"name": names[i]},
                    )
                )
            positive(self.floors[i], where, "floor")
        return faults

    def _all_orders(self, subject: Subject) -> list[tuple[Subject, FloatArray]]:
        both = [((*subject, "orders"), self.orders)]
        if isinstance(self.reverse, ReverseConstant):
            both.append(((*subject, "reversible", "orders"), self.reverse.orders))
        return both

    def forward(self, reactions: ReactionSet, reaction: int, stream: Stream) -> PowerProduct:
        """Return the forward rate of ``of`` in the stream, mol/(m3 s), shape (...).

        Raises
        ------
        Refused
            See :func:`core.rates.constants.at`; ``impossible-value`` for a factor.
        """
        subject = rate_subject(reactions, reaction)
        product = self._one_way(self.constant, self.orders, stream, (*subject, "constant"))
        factors = np.log(positive(self.activity, (*subject, "activity"), "activity"))
        factors = factors + np.log(
            positive(self.effectiveness, (*subject, "effectiveness"), "effectiveness")
        )
        return PowerProduct(product.ln_factor + factors, product.exponents, product.floored)

    def reverse_over_forward(
        self, reactions: ReactionSet, reaction: int, stream: Stream
    ) -> PowerProduct | None:
        """Return reverse over forward rate; None for an irreversible reaction.

        The net rate is forward * (1 - this). It is one at equilibrium.
        """
        if self.reverse is None:
            return None
        subject = rate_subject(reactions, reaction)
        if isinstance(self.reverse, ByAffinity):
            where: Subject = (*subject[:-1], "equilibrium_constant")
            quotient = self.reverse.equilibrium.quotient_over_constant(
                reactions, reaction, stream, where
            )
            exponent = (*subject, "reversible", "affinity_exponent")
            return quotient.to_the(positive(self.reverse.exponent, exponent, "affinity exponent"))
        where = (*subject, "reversible", "constant")
        reverse = self._one_way(self.reverse.constant, self.reverse.orders, stream, where)
        forward = self._one_way(self.constant, self.orders, stream, (*subject, "constant"))
        return reverse.times(forward.to_the(np.array(-1.0)))

    def _one_way(
        self, constant: TemperatureDependent, orders: FloatArray, stream: Stream, subject: Subject
    ) -> PowerProduct:
        ln_k = ln_in_range(constant, stream.temperature, subject)
        if self.floors is None:
            return product_of(orders, self.driving, stream, ln_k)
        floors = self.floors
        held = (floors > 0) & (orders < 0)
        product = product_of(np.where(held, 0.0, orders), self.driving, stream, ln_k)
        if not held.any():
            return product
        per_concentration = ln_per_concentration(self.driving, stream)
        ln_factor, floored = product.ln_factor, []
        for i in np.flatnonzero(held.any(axis=tuple(range(orders.ndim - 1)))):
            power = np.where(held[..., i], orders[..., i], 0.0)
            ln_floor = np.log(floors[i])
            ln_factor = ln_factor + power * ln_floor
            excess = per_concentration - ln_floor
            floored.append(FlooredFactor(int(i), self.driving == "mole-fraction", excess, power))
        return PowerProduct(ln_factor, product.exponents, tuple(floored))

    def check_absences(
        self, reactions: ReactionSet, reaction: int, absent: np.ndarray, orders: FloatArray
    ) -> None:
        """Refuse a negative order, not held by a floor, of a substance that is absent.

        Parameters
        ----------
        reactions : ReactionSet
        reaction : int
        absent : ndarray of bool, shape (N, S)
            Absent somewhere on the way.
        orders : ndarray, shape (N, S)
            Those that stand without a floor, reverse ones included as they act.

        Raises
        ------
        Refused
            ``negative-order-needs-floor``.
        """
        bad: BoolArray = absent & (orders < 0)
        if not bad.any():
            return
        names = reactions.names
        i = int(np.flatnonzero(bad.any(axis=0))[0])
        raise refuse(
            "negative-order-needs-floor",
            (*rate_subject(reactions, reaction), "orders", names[i]),
            "the order of {name} acts as {order}, and {name} is absent at the feed or at the "
            "target, where such a rate has no bound; state a floor for {name}, feed some of it, "
            "or give the reverse rate orders of its own",
            name=names[i],
            order=f"{orders[bad[:, i], i][0]:.6g}",
        )


def _of_any_case(flags: BoolArray) -> BoolArray:
    """Return which substances are marked in any case, shape (S,)."""
    return np.asarray(flags.reshape(-1, flags.shape[-1]).any(axis=0))


def rate_subject(reactions: ReactionSet, reaction: int) -> Subject:
    """Return the name of a reaction's rate law."""
    return ("reactions", reactions.reactions[reaction].id, "rate")


def expected_unit_exponents(driving: Driving, orders_sum: float) -> Exponents:
    """Return the exponents of (kg, m, s, K, mol) that k must have, per volume of fluid.

    Parameters
    ----------
    driving : Driving
    orders_sum : float
        Sum of the orders of the law's own direction.
    """
    per = {
        "concentration": DIMENSIONS["concentration"],
        "partial-pressure": DIMENSIONS["pressure"],
        "mole-fraction": DIMENSIONS["dimensionless"],
    }[driving]
    kg, m, s, k, mol = (
        rate - orders_sum * force
        for rate, force in zip(DIMENSIONS["reaction_rate"], per, strict=True)
    )
    return kg, m, s, k, mol


def expected_unit_parts(driving: Driving, orders_sum: float) -> list[tuple[str, float]]:
    """Return the unit expected of k as named parts, ``[("mol", 0.5), ("m3", -0.5), ("s", -1)]``."""
    if driving == "concentration":
        parts = [("mol", 1 - orders_sum), ("m3", orders_sum - 1), ("s", -1.0)]
    else:
        parts = [("mol", 1.0), ("m3", -1.0), ("s", -1.0)]
        if driving == "partial-pressure":
            parts.append(("bar", -orders_sum))
    return [(name, exponent) for name, exponent in parts if exponent]
