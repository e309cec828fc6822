"""Heat carried by streams, and the temperature that an adiabatic reaction ends at.

For flows F_i entering at T0 and extents xi_r, with sensible heats h_i(T) (the
integrals of C_p,i) and enthalpies of reaction dH_r(T), nothing exchanged and no
shaft work::

    sum_i F_i0 [h_i(T) - h_i(T0)] + sum_r xi_r dH_r(T) = 0

The left side rises with T wherever the outlet holds anything, since its slope
is the heat capacity flow of the outlet. Pressure plays no part: gases are ideal,
liquids and solids of pressure-independent enthalpy. In a closed vessel whose
volume is held the internal energy stays, each H_i of a gas less Z R T. N cases stand along the
leading axes of flows, extents and temperatures.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Amount, Fault, Refused, Subject, refuse
from core.numerics.roots import find_root
from core.substances.heat_capacity import REFERENCE_TEMPERATURE, HeatCapacity
from core.substances.property_data import StandardProperties
from core.thermochemistry.reaction_properties import EXTRAPOLATED, beyond_range

COLDEST, HOTTEST = 50.0, 6000.0
"""K; between these an adiabatic temperature is looked for, where the data let it."""


@dataclass(frozen=True)
class StatedHeat:
    """The heat of one reaction as its caller states it.

    Attributes
    ----------
    heat : float
        J per mole of ``of`` consumed or formed; below zero where heat is given off.
    of : int
        A substance of the reaction.
    at : float
        K.
    """

    heat: float
    of: int
    at: float


@dataclass(frozen=True, eq=False)
class HeatsOfReaction:
    """Enthalpies of reactions over temperature, from one value of each and the heat capacities.

    Attributes
    ----------
    nu : ndarray, shape (R, S)
        Coefficients, products above zero.
    enthalpies : ndarray, shape (R,)
        J per mole of extent, each at its own ``at``.
    at : ndarray, shape (R,)
        K.
    heat_capacities : tuple of HeatCapacity, length S
    """

    nu: FloatArray
    enthalpies: FloatArray
    at: FloatArray
    heat_capacities: tuple[HeatCapacity, ...]

    @classmethod
    def from_formation(
        cls,
        nu: FloatArray,
        properties: Sequence[StandardProperties],
        stated: Mapping[int, StatedHeat] | None = None,
    ) -> HeatsOfReaction:
        """Return those that enthalpies of formation at 298.15 K give, or that are stated.

        Parameters
        ----------
        nu : ndarray, shape (R, S)
        properties : sequence of StandardProperties, length S
            With heat capacities, and with enthalpies where a reaction needs them.
        stated : Mapping[int, StatedHeat], optional
            By reaction; they win.
        """
        said = stated or {}
        h = np.array([np.nan if p.enthalpy is None else p.enthalpy for p in properties])
        enthalpies = np.zeros(len(nu))
        for j, row in enumerate(nu):
            if j not in said:
                reacting = row != 0
                enthalpies[j] = row[reacting] @ h[reacting]
        at = np.full(len(nu), REFERENCE_TEMPERATURE)
        made = cls(nu, enthalpies, at, _capacities(properties))
        for j, one in said.items():
            made = made.stating(j, one.heat, one.of, one.at)
        return made

    def stating(self, reaction: int, heat: float, of: int, at: float) -> HeatsOfReaction:
        """Return these with one reaction's heat as stated.

        Parameters
        ----------
        reaction : int
        heat : float
            J per mole of ``of`` consumed or formed; below zero where heat is given off.
        of : int
            A substance of the reaction.
        at : float
            K.
        """
        enthalpies, temperatures = self.enthalpies.copy(), self.at.copy()
        enthalpies[reaction] = heat * abs(self.nu[reaction, of])
        temperatures[reaction] = at
        return HeatsOfReaction(self.nu, enthalpies, temperatures, self.heat_capacities)

    def enthalpy(self, temperature: float | FloatArray) -> FloatArray:
        """J per mole of extent, shape (..., R), at temperatures of shape (...), K."""
        t = np.asarray(temperature, dtype=float)
        now = _sensible(self.heat_capacities, t)
        then = _sensible(self.heat_capacities, self.at)
        change: FloatArray = now @ self.nu.T - (then * self.nu).sum(axis=-1)
        return self.enthalpies + change

    @cached_property
    def of_substances(self) -> FloatArray:
        """Enthalpies at 298.15 K that the reactions' heats follow from, J/mol, shape (S,).

        Not those of formation, from which they differ by what every reaction
        leaves as it is: a balance over the reactions does not see that.
        """
        found: FloatArray = np.linalg.pinv(self.nu) @ self.enthalpy(REFERENCE_TEMPERATURE)
        return found

    def substance_enthalpies(self, temperature: FloatArray) -> FloatArray:
        """Return ``of_substances`` with the sensible heats, J/mol, shape (..., S), at K (...)."""
        return self.of_substances + _sensible(self.heat_capacities, temperature)


def heat_capacity_flow(
    flows: FloatArray, heat_capacities: Sequence[HeatCapacity], temperature: float | FloatArray
) -> FloatArray:
    """Heat capacity flow of a stream, sum of F_i C_p,i.

    Parameters
    ----------
    flows : ndarray, shape (..., S)
        mol/s (of a batch mol).
    heat_capacities : sequence of HeatCapacity, length S
    temperature : float or ndarray, shape (...)
        K.

    Returns
    -------
    ndarray, shape (...)
        W/K (of a batch J/K).
    """
    t = np.asarray(temperature, dtype=float)
    each = np.stack([cp.at(t) for cp in heat_capacities], axis=-1)
    total: FloatArray = (flows * each).sum(axis=-1)
    return total


def sensible_heat(
    flows: FloatArray,
    heat_capacities: Sequence[HeatCapacity],
    start: float | FloatArray,
    end: float | FloatArray,
) -> FloatArray:
    """Heat that brings a stream from one temperature to another, without a reaction.

    Parameters and result as :func:`heat_capacity_flow`; W (of a batch J).
    """
    change = _sensible(heat_capacities, np.asarray(end, dtype=float))
    change = change - _sensible(heat_capacities, np.asarray(start, dtype=float))
    total: FloatArray = (flows * change).sum(axis=-1)
    return total


def adiabatic_temperature(
    flows: FloatArray,
    extents: FloatArray,
    temperature: float | FloatArray,
    heats: HeatsOfReaction,
    properties: Sequence[StandardProperties],
    subject: Subject,
    held: FloatArray | None = None,
) -> FloatArray:
    """Temperature that a stream leaves at when its reactions exchange no heat.

    Parameters
    ----------
    flows : ndarray, shape (..., S)
        Entering, mol/s (of a batch at constant pressure mol).
    extents : ndarray, shape (..., R)
        mol/s (mol); no flow that leaves may be below zero.
    temperature : float or ndarray, shape (...)
        Of the inlet, K.
    heats : HeatsOfReaction
    properties : sequence of StandardProperties, length S
        For what a refusal says of their ranges.
    subject : Subject
        What a refusal is about.
    held : ndarray, shape (S,), optional
        In a closed vessel that holds its volume, Z of each substance of the gas, and 0
        of the others. Left out: at constant pressure.

    Returns
    -------
    ndarray, shape (...)
        K.

    Raises
    ------
    Refused
        ``impossible-value``: a flow or the sum of them is below zero or nothing leaves.
        ``outside-correlation``: the temperature lies beyond the heat capacities' ranges.
    """
    lead = np.broadcast_shapes(
        flows.shape[:-1], extents.shape[:-1], np.shape(np.asarray(temperature))
    )
    f = np.broadcast_to(flows, (*lead, flows.shape[-1])).reshape(-1, flows.shape[-1])
    x = np.broadcast_to(extents, (*lead, extents.shape[-1])).reshape(-1, extents.shape[-1])
    t0 = np.broadcast_to(np.asarray(temperature, dtype=float), lead).reshape(-1)
    out = f + x @ heats.nu
    _check_flows(f, out, properties, subject)
    # Which substances a case holds decides how far its own temperature may go.
    present = (f != 0) | (out != 0)
    faults = outside_ranges(properties, present, t0, subject)
    if faults:
        raise Refused(faults)
    start = (f * _sensible(heats.heat_capacities, t0)).sum(axis=-1)
    # Of sum F0 h(T) + sum xi dH(T) what hangs on T is the sensible heat of the outlet.
    then = (_sensible(heats.heat_capacities, heats.at) * heats.nu).sum(axis=-1)
    wanted: FloatArray = start - (x * (heats.enthalpies - then)).sum(axis=-1)
    r = np.zeros(len(properties)) if held is None else GAS_CONSTANT * held
    wanted = wanted - f @ r * t0

    def excess(t: FloatArray, case: np.ndarray) -> FloatArray:
        gained = (out[case] * _sensible(heats.heat_capacities, t)).sum(axis=-1)
        return np.asarray(gained - out[case] @ r * t - wanted[case])

    reach = np.array([range_of(cp) for cp in heats.heat_capacities])
    low = np.where(present, reach[:, 0], COLDEST).max(axis=-1)
    high = np.where(present, reach[:, 1], HOTTEST).min(axis=-1)
    bottom, top = np.minimum(low, t0), np.maximum(high, t0)
    rows = np.arange(len(t0))
    below, above = excess(bottom, rows) > 0, excess(top, rows) < 0
    if below.any() or above.any():
        case = int(np.flatnonzero(below | above)[0])
        within = [p for p, there in zip(properties, present[case], strict=True) if there]
        raise temperature_out_of_reach(bool(above[case]), within, subject)
    # On the side of the inlet where heat is taken up, or given off.
    warmer = excess(t0, rows) < 0
    lower, upper = np.where(warmer, t0, bottom), np.where(warmer, top, t0)
    found: FloatArray = find_root(excess, lower, upper, subject=subject)
    faults = outside_ranges(properties, present, found, subject)
    if faults:
        raise Refused(faults)
    return found.reshape(lead)


def temperatures_known(properties: Sequence[StandardProperties]) -> tuple[float, float]:
    """Return the temperatures between which every heat capacity is used, K."""
    each = [range_of(cp) for cp in _capacities(properties)]
    return max(low for low, _ in each), min(high for _, high in each)


def _capacities(properties: Sequence[StandardProperties]) -> tuple[HeatCapacity, ...]:
    found = []
    for p in properties:
        assert p.heat_capacity is not None
        found.append(p.heat_capacity)
    return tuple(found)


def _sensible(heat_capacities: Sequence[HeatCapacity], t: FloatArray) -> FloatArray:
    """H(T) - H(298.15 K) of each, J/mol, shape (..., S)."""
    return np.stack([cp.enthalpy(t) for cp in heat_capacities], axis=-1)


def _check_flows(
    flows: FloatArray,
    out: FloatArray,
    properties: Sequence[StandardProperties],
    subject: Subject,
) -> None:
    total = out.sum(axis=-1)
    tolerance = 1e-12 * np.abs(flows).sum(axis=-1, keepdims=True)
    bad = (out < -tolerance) | (flows < 0)
    if bad.any():
        i = int(np.flatnonzero(bad.any(axis=0))[0])
        raise refuse(
            "impossible-value",
            subject,
            "the extents leave less than nothing of {substance}; lower them, or feed more of it",
            substance=properties[i].substance,
        )
    if not (total > 0).all():
        raise refuse(
            "impossible-value",
            subject,
            "nothing leaves, so that there is no temperature it leaves at; state what is fed",
        )


def outside_ranges(
    properties: Sequence[StandardProperties],
    present: np.ndarray,
    temperature: FloatArray,
    subject: Subject,
) -> list[Fault]:
    """Return what stands against temperatures of N cases, each holding its own substances.

    Parameters
    ----------
    properties : sequence of StandardProperties, length S
    present : ndarray of bool, shape (N, S)
    temperature : ndarray, shape (N,)
        K.
    subject : Subject
        What a fault is about.
    """
    return [
        fault
        for i, p in enumerate(properties)
        if present[:, i].any()
        for fault in beyond_range((p,), temperature[present[:, i]], subject)
    ]


def range_of(heat_capacity: HeatCapacity) -> tuple[float, float]:
    """Return the temperatures between which a heat capacity is used, K."""
    if not heat_capacity.bounded:
        return COLDEST, HOTTEST
    low, high = heat_capacity.lowest - EXTRAPOLATED, heat_capacity.highest + EXTRAPOLATED
    return max(low, COLDEST), min(high, HOTTEST)


def temperature_out_of_reach(
    above: bool, properties: Sequence[StandardProperties], subject: Subject
) -> Exception:
    """Return the refusal of a temperature above, or below, all that its substances' data know."""
    ends = [range_of(cp)[1 if above else 0] for cp in _capacities(properties)]
    at = int(np.argmin(ends) if above else np.argmax(ends))
    return refuse(
        "outside-correlation",
        subject,
        "without exchange of heat the temperature would lie {side} {limit}, as far as the heat"
        " capacity of {substance} ({source}) reaches; state 'heat_capacity' of {substance} under"
        " 'species', or a smaller change.",
        side="above" if above else "below",
        limit=Amount(ends[at], "temperature"),
        substance=properties[at].substance,
        source=properties[at].sources["heat_capacity"],
    )
