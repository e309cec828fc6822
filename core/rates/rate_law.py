"""Rate laws: powers of a driving force over hyperbolic denominators, irreversible or reversible.

::

    net rate = activity * effectiveness * (k prod d^n - reverse) / denominator
    denominator = product over its factors of (leading + sum of K prod d^n)^power

The denominators count sites that adsorbed substances cover (O. A. Hougen, K. M.
Watson, Ind. Eng. Chem. 35 (1943) 529), or an enzyme bound to its substrate (L.
Michaelis, M. L. Menten, Biochem. Z. 49 (1913) 333), with one adsorption constant
a term.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.dimensions import DIMENSIONS, Exponents
from core.errors import Fault, Refused, Subject, refuse
from core.rates.constants import TemperatureDependent, Values, finite, ln_in_range, positive
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.pellet import Pellet, Per, effectiveness_factor
from core.rates.power_product import (
    Columns,
    Driving,
    FlooredFactor,
    PowerProduct,
    Rows,
    Warmth,
    ln_per_concentration,
    product_of,
    spread,
    warming_of,
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
class DenominatorTerm:
    """K prod d^n, of the driving force d of its law.

    Attributes
    ----------
    constant : TemperatureDependent
        K, in the driving force to minus the sum of the orders; one of the forms
        of a rate constant, or a van 't Hoff with the enthalpy of adsorption.
    orders : ndarray, shape (..., S)
    """

    constant: TemperatureDependent
    orders: FloatArray


@dataclass(frozen=True, eq=False)
class DenominatorFactor:
    """(leading + sum of the terms)^power.

    Attributes
    ----------
    leading : float or ndarray, shape (...)
        Zero or above, -.
    terms : tuple of DenominatorTerm
        One at least.
    power : float or ndarray, shape (...)
        Above zero, -.
    """

    leading: Values
    terms: tuple[DenominatorTerm, ...]
    power: Values = 1.0


@dataclass(frozen=True, eq=False)
class Hindrance:
    """One factor of the denominator in a stream, its terms as products of concentrations.

    Attributes
    ----------
    leading, power : ndarray, shape (...)
    terms : tuple of PowerProduct
    """

    leading: FloatArray
    terms: tuple[PowerProduct, ...]
    power: FloatArray

    def over(self, lead: tuple[int, ...]) -> Hindrance:
        """Return it with its leading axes spread over ``lead`` and flattened to N cases."""
        return Hindrance(
            spread(self.leading, lead).reshape(-1),
            tuple(term.over(lead) for term in self.terms),
            spread(self.power, lead).reshape(-1),
        )

    def ln_value(self, columns: Columns, rows: Rows, warmth: Warmth | None = None) -> FloatArray:
        """Return the logarithm of the factor, see :meth:`PowerProduct.ln_value`."""
        total = rows(self.leading)
        for term in self.terms:
            total = total + np.exp(term.ln_value(columns, rows, warmth))
        found: FloatArray = rows(self.power) * np.log(total)
        return found


@dataclass(frozen=True, eq=False)
class Pores:
    """Effectiveness of a pellet in a stream.

    Attributes
    ----------
    geometry : Geometry
    modulus_squared : PowerProduct
        Of the forward reaction; no concentration counts.
    reverse_share : PowerProduct or None
        What a reverse reaction adds to it, over it; no concentration counts.
    """

    pellet: Pellet
    modulus_squared: PowerProduct
    reverse_share: PowerProduct | None

    def over(self, lead: tuple[int, ...]) -> Pores:
        """Return it with its leading axes spread over ``lead`` and flattened to N cases."""
        reverse = self.reverse_share
        return Pores(
            self.pellet,
            self.modulus_squared.over(lead),
            None if reverse is None else reverse.over(lead),
        )

    def modulus(self, rows: Rows, warmth: Warmth | None = None) -> FloatArray:
        """Return the Thiele modulus, shape (m, q) or (m, 1), see :meth:`PowerProduct.ln_value`."""
        squared = np.exp(self.modulus_squared.ln_value(_no_columns, rows, warmth))
        if self.reverse_share is not None:
            squared = squared * (
                1.0 + np.exp(self.reverse_share.ln_value(_no_columns, rows, warmth))
            )
        return np.sqrt(squared)

    def ln_effectiveness(self, rows: Rows, warmth: Warmth | None = None) -> FloatArray:
        """Return the logarithm of the effectiveness, shape (m, q) or (m, 1)."""
        factor: FloatArray = effectiveness_factor(self.pellet.geometry, self.modulus(rows, warmth))
        return np.log(factor)


def _no_columns(_: int) -> FloatArray:
    return np.zeros((1, 1))


@dataclass(frozen=True, eq=False)
class RateLaw:
    """Rate of one reaction, mol/(m3 s) or mol/(kg s), by powers of a driving force.

    Attributes
    ----------
    of : int
        The substance whose rate of consumption or formation the law gives.
    orders : ndarray, shape (..., S)
        Of each substance, -.
    constant : TemperatureDependent
        k, in the rate's unit per driving force to the sum of the orders.
    driving : Driving
    reverse : ByAffinity, ReverseConstant or None
        None: irreversible. It stands over the same denominator.
    floors : ndarray, shape (S,), or None
        The driving force (mol/m3, Pa, -) below which a factor of negative
        order stays as it is; 0 where none is stated.
    activity : float or ndarray, shape (...)
        A factor on the net rate, -.
    effectiveness : float or ndarray, shape (...), or Pellet
        Another; or the pellet that it follows from. Its modulus counts the
        constant as it is, without ``activity``, which multiplies the rate that
        is observed.
    denominator : tuple of DenominatorFactor
    per : Per
        What the rate is counted by: m3 of fluid, m3 of bed, kg of catalyst.
    """

    of: int
    orders: FloatArray
    constant: TemperatureDependent
    driving: Driving = "concentration"
    reverse: ByAffinity | ReverseConstant | None = None
    floors: FloatArray | None = None
    activity: Values = 1.0
    effectiveness: Values | Pellet = 1.0
    denominator: tuple[DenominatorFactor, ...] = ()
    per: Per = "fluid-volume"

    @property
    def needs_temperature(self) -> bool:
        """Whether any of its constants follows temperature."""
        constants = [self.constant]
        if isinstance(self.reverse, ByAffinity):
            constants.append(self.reverse.equilibrium.constant)
        elif self.reverse is not None:
            constants.append(self.reverse.constant)
        constants += [term.constant for factor in self.denominator for term in factor.terms]
        return any(constant.needs_temperature for constant in constants)

    def check(self, reactions: ReactionSet, reaction: int, stream: Stream) -> None:
        """Refuse a law that says nothing about this reaction in this stream.

        Raises
        ------
        Refused
            ``rate-of-absent-substance``, ``order-outside-phase``,
            ``driving-needs-gas``, ``floor-without-negative-order``,
            ``effectiveness-needs-first-order``, ``field-needed``,
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
        for i, factor in enumerate(self.denominator):
            where = (*subject, "denominator", i)
            positive(factor.power, (*where, "power"), "power")
            leading = finite(factor.leading, (*where, "leading"), "leading number")
            if (leading < 0).any() or not factor.terms:
                faults.append(
                    Fault(
                        "impossible-value",
                        (*where, "leading"),
                        "a factor of the denominator is a number, zero or above, and one term at "
                        "least",
                    )
                )
        if isinstance(self.effectiveness, Pellet) and not faults:
            where = (*subject, "effectiveness")
            faults.extend(self.effectiveness.check(self.per, where))
            faults.extend(self._beyond_first_order(reactions, reaction, stream))
        if faults:
            raise Refused(faults)

    def _beyond_first_order(
        self, reactions: ReactionSet, reaction: int, stream: Stream
    ) -> list[Fault]:
        """Return why the effectiveness does not follow from a modulus."""
        subject = rate_subject(reactions, reaction)
        nu, orders = reactions.nu[reaction], self.orders.reshape(-1, self.orders.shape[-1])
        counted = np.flatnonzero(orders.any(axis=0))
        why = ""
        if self.driving == "mole-fraction":
            why = "mole fractions drive it; give it in concentrations or partial pressures"
        elif self.denominator:
            why = "it has a denominator"
        elif counted.size != 1 or (orders[:, counted] != 1).any() or not nu[counted[0]] < 0:
            why = "its orders are not 1 in one reactant and 0 in all others"
        elif self.reverse is not None:
            ratio = self.reverse_over_forward(reactions, reaction, stream)
            assert ratio is not None
            powers = ratio.exponents.reshape(-1, ratio.exponents.shape[-1])
            others = np.delete(powers, counted[0], axis=1)
            product = np.delete(np.append(nu, 0.0), counted[0]) > 0
            opposed = np.abs(others - 1.0) <= 1e-12
            linear = (
                (np.abs(powers[:, counted[0]] + 1.0) <= 1e-12).all()
                and (opposed | (others == 0)).all()
                and (opposed.sum(axis=1) == 1).all()
                and (opposed <= product).all()
                and (opposed == opposed[0]).all()
            )
            if not linear:
                why = "its reverse rate is not of order 1 in one product and 0 in all others"
        if not why:
            return []
        return [
            Fault(
                "effectiveness-needs-first-order",
                (*subject, "effectiveness"),
                "an effectiveness follows from a Thiele modulus where the rate is of first order,"
                " forward and reverse, and here " + why + "; state the effectiveness as a number",
            )
        ]

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
        every = [((*subject, "orders"), self.orders)]
        if isinstance(self.reverse, ReverseConstant):
            every.append(((*subject, "reversible", "orders"), self.reverse.orders))
        return every + [(where, term.orders) for where, term in self._terms(subject)]

    def _terms(self, subject: Subject) -> list[tuple[Subject, DenominatorTerm]]:
        return [
            ((*subject, "denominator", i, "terms", t, "orders"), term)
            for i, factor in enumerate(self.denominator)
            for t, term in enumerate(factor.terms)
        ]

    def forward(
        self, reactions: ReactionSet, reaction: int, stream: Stream, *, follow: bool = False
    ) -> PowerProduct:
        """Return the forward rate of ``of`` in the stream, shape (...).

        Without its denominator and the effectiveness of a pellet, for which see
        :meth:`hindrances` and :meth:`pores`. ``follow``: with how it follows
        temperature from that of the stream.

        Raises
        ------
        Refused
            See :func:`core.rates.constants.at`; ``impossible-value`` for a factor.
        """
        subject = rate_subject(reactions, reaction)
        where = (*subject, "constant")
        product = self._one_way(self.constant, self.orders, stream, where, follow=follow)
        for name in ("activity", "effectiveness"):
            factor = getattr(self, name)
            # Mostly a plain 1, which need not be looked at.
            if factor != 1.0 if isinstance(factor, float) else not isinstance(factor, Pellet):
                ln_factor = np.log(positive(factor, (*subject, name), name))
                product = replace(product, ln_factor=product.ln_factor + ln_factor)
        return product

    def hindrances(
        self, reactions: ReactionSet, reaction: int, stream: Stream, *, follow: bool = False
    ) -> tuple[Hindrance, ...]:
        """Return the factors of the denominator in the stream; arguments as :meth:`forward`."""
        subject = rate_subject(reactions, reaction)
        found = []
        for i, factor in enumerate(self.denominator):
            terms = tuple(
                self._one_way(
                    term.constant,
                    term.orders,
                    stream,
                    (*subject, "denominator", i, "terms", t, "constant"),
                    follow=follow,
                )
                for t, term in enumerate(factor.terms)
            )
            leading = np.asarray(factor.leading, dtype=float)
            found.append(Hindrance(leading, terms, np.asarray(factor.power, dtype=float)))
        return tuple(found)

    def pores(
        self, reactions: ReactionSet, reaction: int, stream: Stream, *, follow: bool = False
    ) -> Pores | None:
        """Return the effectiveness of the pellet in the stream; None where it is a number.

        Of a law that :meth:`check` has passed. Per volume of pellet a rate k (c_A
        - r c_R) consumes A at a k (...) and forms R at b k (...): both diffuse so
        that c_A - r c_R obeys one equation with the constant k (a + b r).
        """
        pellet = self.effectiveness
        if not isinstance(pellet, Pellet):
            return None
        nu = reactions.nu[reaction]
        forward = self._one_way(
            self.constant,
            self.orders,
            stream,
            (*rate_subject(reactions, reaction), "constant"),
            follow=follow,
        )
        orders = self.orders.reshape(-1, self.orders.shape[-1])
        reactant = int(np.flatnonzero(orders.any(axis=0))[0])
        scale = np.asarray(pellet.size, dtype=float) ** 2 / np.asarray(pellet.diffusivity)
        scale = scale * pellet.per_volume(self.per) * abs(nu[reactant] / nu[self.of])
        ratio = self.reverse_over_forward(reactions, reaction, stream, follow=follow)
        if ratio is not None:
            powers = ratio.exponents.reshape(-1, ratio.exponents.shape[-1])[0]
            product = int(np.flatnonzero(powers > 0.5)[0])
            ratio = _factor_of(ratio, abs(nu[product] / nu[reactant]))
        return Pores(pellet, _factor_of(forward, scale), ratio)

    def reverse_over_forward(
        self, reactions: ReactionSet, reaction: int, stream: Stream, *, follow: bool = False
    ) -> PowerProduct | None:
        """Return reverse over forward rate; None for an irreversible reaction.

        The net rate is forward * (1 - this). It is one at equilibrium. Arguments
        as :meth:`forward`.
        """
        if self.reverse is None:
            return None
        subject = rate_subject(reactions, reaction)
        if isinstance(self.reverse, ByAffinity):
            where: Subject = (*subject[:-1], "equilibrium_constant")
            quotient = self.reverse.equilibrium.quotient_over_constant(
                reactions, reaction, stream, where, follow=follow
            )
            exponent = (*subject, "reversible", "affinity_exponent")
            return quotient.to_the(positive(self.reverse.exponent, exponent, "affinity exponent"))
        where = (*subject, "reversible", "constant")
        reverse = self._one_way(
            self.reverse.constant, self.reverse.orders, stream, where, follow=follow
        )
        where = (*subject, "constant")
        forward = self._one_way(self.constant, self.orders, stream, where, follow=follow)
        return reverse.times(forward.to_the(np.array(-1.0)))

    def _one_way(
        self,
        constant: TemperatureDependent,
        orders: FloatArray,
        stream: Stream,
        subject: Subject,
        *,
        follow: bool = False,
    ) -> PowerProduct:
        ln_k = ln_in_range(constant, stream.temperature, subject)
        warming = warming_of(constant) if follow else None
        if self.floors is None:
            return product_of(orders, self.driving, stream, ln_k, warming)
        floors = self.floors
        held = (floors > 0) & (orders < 0)
        product = product_of(np.where(held, 0.0, orders), self.driving, stream, ln_k, warming)
        if not held.any():
            return product
        per_concentration = ln_per_concentration(self.driving, stream)
        ln_factor, floored = product.ln_factor, []
        for i in np.flatnonzero(held.any(axis=tuple(range(orders.ndim - 1)))):
            power = np.where(held[..., i], orders[..., i], 0.0)
            ln_floor = np.log(floors[i])
            ln_factor = ln_factor + power * ln_floor
            excess = per_concentration - ln_floor
            floored.append(
                FlooredFactor(
                    int(i),
                    self.driving == "mole-fraction",
                    excess,
                    power,
                    self.driving == "partial-pressure",
                )
            )
        return replace(product, ln_factor=ln_factor, floored=tuple(floored))

    def check_absences(
        self,
        reactions: ReactionSet,
        reaction: int,
        absent: np.ndarray,
        orders: FloatArray,
        term: tuple[int, int] | None = None,
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
        term : tuple of int, optional
            Of which factor of the denominator, and which term in it, they are.

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
        where, value, mend = rate_subject(reactions, reaction), "bound", "or feed some of it"
        if term is not None:
            where, value = (*where, "denominator", term[0], "terms", term[1]), "value"
        else:
            mend = "feed some of it, or give the reverse rate orders of its own"
        raise refuse(
            "negative-order-needs-floor",
            (*where, "orders", names[i]),
            "the order of {name} acts as {order}, and {name} is absent at the feed or at the "
            "target, where such a rate has no {value}; state a floor for {name}, {mend}",
            name=names[i],
            order=f"{orders[bad[:, i], i][0]:.6g}",
            value=value,
            mend=mend,
        )


def _factor_of(product: PowerProduct, scale: Values) -> PowerProduct:
    """Return the factor of a product alone, scaled, without its powers."""
    ln_factor = product.ln_factor + np.log(scale)
    return replace(product, ln_factor=ln_factor, exponents=0.0 * product.exponents)


def _of_any_case(flags: BoolArray) -> BoolArray:
    """Return which substances are marked in any case, shape (S,)."""
    return np.asarray(flags.reshape(-1, flags.shape[-1]).any(axis=0))


def rate_subject(reactions: ReactionSet, reaction: int) -> Subject:
    """Return the name of a reaction's rate law."""
    return ("reactions", reactions.reactions[reaction].id, "rate")


def expected_unit_exponents(
    driving: Driving, orders_sum: float, per: Per = "fluid-volume"
) -> Exponents:
    """Return the exponents of (kg, m, s, K, mol) that k must have.

    Parameters
    ----------
    driving : Driving
    orders_sum : float
        Sum of the orders of the law's own direction.
    per : Per
    """
    rate = DIMENSIONS["reaction_rate_per_mass" if per == "catalyst-mass" else "reaction_rate"]
    return _less_force(rate, driving, orders_sum)


def expected_adsorption_exponents(driving: Driving, orders_sum: float) -> Exponents:
    """Return the exponents that the constant of a term must have, a number beside its factor."""
    return _less_force(DIMENSIONS["dimensionless"], driving, orders_sum)


def _less_force(exponents: Exponents, driving: Driving, order: float) -> Exponents:
    per = {
        "concentration": DIMENSIONS["concentration"],
        "partial-pressure": DIMENSIONS["pressure"],
        "mole-fraction": DIMENSIONS["dimensionless"],
    }[driving]
    kg, m, s, k, mol = (whole - order * force for whole, force in zip(exponents, per, strict=True))
    return kg, m, s, k, mol


def expected_unit_parts(
    driving: Driving, orders_sum: float, per: Per = "fluid-volume"
) -> list[tuple[str, float]]:
    """Return the unit expected of k as named parts, ``[("mol", 0.5), ("m3", -0.5), ("s", -1)]``."""
    by_mass = per == "catalyst-mass"
    volume = 0.0 if by_mass else -1.0
    parts = [("mol", 1.0), ("m3", volume), ("kg", -1.0 if by_mass else 0.0), ("s", -1.0)]
    if driving == "concentration":
        parts[:2] = [("mol", 1.0 - orders_sum), ("m3", volume + orders_sum)]
    elif driving == "partial-pressure":
        parts.append(("bar", -orders_sum))
    return [(name, exponent) for name, exponent in parts if exponent]


def expected_adsorption_parts(driving: Driving, orders_sum: float) -> list[tuple[str, float]]:
    """Return the unit expected of the constant of a term, as :func:`expected_unit_parts`."""
    parts = {
        "concentration": [("m3", orders_sum), ("mol", -orders_sum)],
        "partial-pressure": [("bar", -orders_sum)],
        "mole-fraction": [],
    }[driving]
    return [(name, exponent) for name, exponent in parts if exponent]
