"""The rate of a reaction at one place: from concentrations, temperature and pressure there.

Written on numbers of any kind (:mod:`core.numerics.straight_line`), so that the same
law drives an integrator, a balance over a tank and its enclosures. Along the path of
one reaction, where everything is linear in its conversion, logarithms serve better
(:mod:`core.rates.power_product`); tests hold the two together.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Subject
from core.numerics.straight_line import Number, power_of_amount
from core.rates.constants import TemperatureDependent
from core.rates.pellet import Pellet, effectiveness_factor
from core.rates.power_product import Driving
from core.rates.rate_law import ByAffinity, RateLaw, ReverseConstant, rate_subject
from core.reactions.reaction_set import ReactionSet

NEXT_TO_NOTHING = 1e-30
"""mol/m3; what a substance counts as, at least, where a rate divides by it."""


@dataclass(frozen=True, eq=False)
class Place:
    """The state of the fluid at one place; each number a float, an array or a symbol.

    Attributes
    ----------
    concentrations : sequence of Number, length S
        mol/m3; of a substance outside the phase without meaning.
    in_phase : ndarray of bool, shape (S,)
    gas : bool
        Whether it is a gas.
    total : Number
        Concentration of all in the phase, mol/m3.
    temperature : Number or None
        K.
    compressibility : Number
        Z of a gas.
    ln_fugacity_coefficients : sequence of Number, length S, or None
        Of a gas that is not ideal.
    """

    concentrations: Sequence[Number]
    in_phase: BoolArray
    gas: bool
    total: Number
    temperature: Number | None
    compressibility: Number = 1.0
    ln_fugacity_coefficients: Sequence[Number] | None = None

    @property
    def pressure_per_concentration(self) -> Number:
        """Z R T, J/mol."""
        assert self.temperature is not None
        return self.compressibility * self.temperature * GAS_CONSTANT

    def per_concentration(self, driving: Driving) -> Number:
        """Return what a concentration is multiplied by to be a driving force."""
        if driving == "concentration":
            return 1.0
        return self.pressure_per_concentration if driving == "partial-pressure" else 1 / self.total


def local_rate(law: RateLaw, reactions: ReactionSet, reaction: int, place: Place) -> Number:
    """Return the rate of extent of a reaction, mol/s per m3 or kg as the law counts it."""
    return _OfLaw(law, reactions, reaction, place).rate()


@dataclass(frozen=True, eq=False)
class _OfLaw:
    law: RateLaw
    reactions: ReactionSet
    reaction: int
    place: Place

    @property
    def subject(self) -> Subject:
        return rate_subject(self.reactions, self.reaction)

    def rate(self) -> Number:
        law, net = self.law, self.forward()
        if law.reverse is not None:
            net = net - self.reverse(law.reverse)
        for at, factor in enumerate(law.denominator):
            below: Number = factor.leading
            for n, term in enumerate(factor.terms):
                where = (*self.subject, "denominator", at, "terms", n, "constant")
                below = below + self._value(term.constant, where) * self._product(term.orders)
            net = net / below**factor.power
        each = abs(float(self.reactions.nu[self.reaction, law.of]))
        return law.activity * self._effectiveness() * net / each

    def forward(self) -> Number:
        """Return the forward rate of the law's substance."""
        law = self.law
        return self._value(law.constant, (*self.subject, "constant")) * self._product(law.orders)

    def reverse(self, reverse: ByAffinity | ReverseConstant) -> Number:
        """Return the reverse rate of the law's substance."""
        if isinstance(reverse, ByAffinity):
            return self._by_affinity(reverse, (*self.subject[:-1], "equilibrium_constant"))
        k = self._value(reverse.constant, (*self.subject, "reversible", "constant"))
        return k * self._product(reverse.orders)

    def _effectiveness(self) -> Number:
        """Return the effectiveness; as :meth:`RateLaw.pores`, but for the stream's own state."""
        law, pellet = self.law, self.law.effectiveness
        if not isinstance(pellet, Pellet):
            return pellet
        nu = self.reactions.nu[self.reaction]
        reactant = int(np.flatnonzero(law.orders)[0])
        each = replace(self, place=replace(self.place, concentrations=[1.0] * len(nu)))
        constant = forward = each.forward()
        if law.reverse is not None:
            product = self._opposed(law.reverse)
            constant = forward + each.reverse(law.reverse) * abs(float(nu[product] / nu[reactant]))
        scale = float(pellet.size) ** 2 / float(pellet.diffusivity) * pellet.per_volume(law.per)
        scale *= abs(float(nu[reactant] / nu[law.of]))
        return effectiveness_factor(pellet.geometry, np.sqrt(constant * scale))

    def _opposed(self, reverse: ByAffinity | ReverseConstant) -> int:
        """Return the product that the reverse rate is of first order in."""
        orders = (
            self.law.orders + float(reverse.exponent) * self.reactions.nu[self.reaction]
            if (isinstance(reverse, ByAffinity))
            else reverse.orders
        )
        return int(np.flatnonzero(np.where(self.place.in_phase, orders, 0.0) > 0.5)[0])

    def _value(self, constant: TemperatureDependent, subject: Subject) -> Number:
        # Beyond all numbers is no warning here: what reads the rate refuses what is not finite.
        with np.errstate(over="ignore"):
            return np.exp(constant.ln_at(self.place.temperature, subject))

    def _product(self, orders: FloatArray) -> Number:
        """Return the product of the driving forces to their orders."""
        return self._powers(orders, np.zeros_like(orders))

    def _powers(self, orders: FloatArray, more: FloatArray) -> Number:
        """Return the product of driving forces to their orders times concentrations to more."""
        law, place = self.law, self.place
        scale = place.per_concentration(law.driving)
        product: Number = 1.0
        scaled = 0.0
        for i, (order, other) in enumerate(zip(orders.tolist(), more.tolist(), strict=True)):
            c = place.concentrations[i]
            if order < 0 and law.floors is not None and law.floors[i] > 0:
                product = product * np.maximum(c * scale, float(law.floors[i])) ** order
                power = other
            else:
                scaled += order
                power = _without_rounding(order + other, abs(order) + abs(other))
            if power > 0:
                product = product * power_of_amount(c, power)
            elif power < 0:
                product = product * np.maximum(c, NEXT_TO_NOTHING) ** power
        scaled = _without_rounding(scaled, float(np.abs(orders).sum()))
        return product * scale**scaled if scaled else product

    def _by_affinity(self, by: ByAffinity, subject: Subject) -> Number:
        """Return the reverse rate that thermodynamics demands."""
        law, place, k = self.law, self.place, by.equilibrium
        nu = np.where(place.in_phase, self.reactions.nu[self.reaction], 0.0)
        m = float(by.exponent)
        ln_factor = law.constant.ln_at(place.temperature, (*subject[:-1], "rate", "constant"))
        ln_factor = ln_factor - m * k.constant.ln_at(place.temperature, subject)
        order = float(nu.sum())
        if abs(order) <= 1e-12 * float(np.abs(nu).sum()):
            order = 0.0
        product = self._powers(law.orders, m * nu)
        if k.kind != "concentration" and place.gas:
            standard = 1.0 if k.kind == "pressure" else k.standard_pressure
            if order:
                product = product * (place.pressure_per_concentration / standard) ** (m * order)
            if place.ln_fugacity_coefficients is not None:
                for ln_phi, n in zip(place.ln_fugacity_coefficients, nu.tolist(), strict=True):
                    if n:
                        ln_factor = ln_factor + m * n * ln_phi
        with np.errstate(over="ignore", invalid="ignore"):
            return np.exp(ln_factor) * product


def _without_rounding(total: float, size: float) -> float:
    return 0.0 if abs(total) <= 1e-14 * size else total
