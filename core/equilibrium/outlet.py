"""How far from equilibrium a measured outlet is, with the uncertainty of its account."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.equilibrium.approach import approach_temperature
from core.equilibrium.constants import StatedConstants
from core.errors import Fact, Note, Subject
from core.rates.equilibrium_constant import (
    EquilibriumConstant,
    LnCorrelation,
    coefficient_sum,
)
from core.real_gas.equation import KnownGas
from core.real_gas.remarks import remark_on_constants
from core.streams.metered import Measurement
from core.thermochemistry.heat_balance import COLDEST, HOTTEST, temperatures_known
from core.thermochemistry.reaction_properties import EXTRAPOLATED, ReactionProperties

NOT_TOLD = 2.0
"""A flow within so many of its standard uncertainties of zero tells no quotient."""
_STEP = 0.5  # K, of the slope of ln K


@dataclass(frozen=True, eq=False)
class MeasuredOutlet:
    """An outlet as the account has it.

    Attributes
    ----------
    flows : ndarray, shape (S,)
        mol/s (batch: mol); not a number where the readings do not tell.
    forms : ndarray, shape (S, n)
        The flows in terms of the unknowns.
    covariance : ndarray, shape (n, n)
        Of the unknowns.
    temperature : Measurement
        K.
    pressure : Measurement or None
        Pa, of a gas.
    volume : float or None
        m3/s (batch: m3), of a liquid.
    volume_form : ndarray, shape (n,), or None
    compressibility : float
        Of a gas: as stated, or by its model.
    """

    flows: FloatArray
    forms: FloatArray
    covariance: FloatArray
    temperature: Measurement
    pressure: Measurement | None = None
    volume: float | None = None
    volume_form: FloatArray | None = None
    compressibility: float = 1.0

    @property
    def subject(self) -> Subject:
        """The outlet of the request."""
        return self.temperature.subject[:-1]

    @property
    def gas_flows(self) -> FloatArray:
        """Flows as an equation of state takes them: none below zero, none unknown."""
        return np.nan_to_num(np.maximum(self.flows, 0.0))


@dataclass(frozen=True)
class ReactionApproach:
    """The approach of one reaction, K; u are standard uncertainties.

    ``ln_quotient_over_constant`` is ln(Q/K) at the outlet's own temperature.
    """

    approach: float
    u: float
    equilibrium_temperature: float
    equilibrium_temperature_u: float
    ln_quotient_over_constant: float
    ln_quotient_u: float


def approaches(
    constants: StatedConstants,
    outlet: MeasuredOutlet,
    gas: KnownGas | None = None,
    witness: KnownGas | None = None,
) -> tuple[tuple[ReactionApproach | None, ...], tuple[Note, ...]]:
    """Return the approach of each reaction, and notes on those that have none.

    Parameters
    ----------
    constants : StatedConstants
    outlet : MeasuredOutlet
    gas : KnownGas or None
        None for an ideal one. Fugacity coefficients are those of the outlet as it is.
    witness : KnownGas or None
        By which an ideal gas is judged, where its constants are known.

    Raises
    ------
    Refused
        ``not-a-gas`` of an outlet that the equation of state has as a liquid only.
    """
    reactions, in_mixture = constants.reactions, constants.in_mixture
    found: list[ReactionApproach | None] = []
    notes: list[Note] = []
    ln_activities, gradients = _activities(constants, outlet, gas)
    u_flow = np.sqrt(
        np.maximum(((outlet.forms @ outlet.covariance) * outlet.forms).sum(axis=1), 0.0)
    )
    known = outlet.flows > NOT_TOLD * u_flow
    for j, constant in enumerate(constants.stated):
        nu = reactions.nu[j]
        subject = constants.subjects[j]
        lacking = np.flatnonzero((nu != 0) & in_mixture & ~known)
        id_ = reactions.reactions[j].id
        order = coefficient_sum(nu, in_mixture)
        if order and constants.phase == "gas":
            # Its mole fractions hang on all that is in the gas, inert or not.
            untold = np.flatnonzero(in_mixture & np.isnan(outlet.flows))
            lacking = np.union1d(lacking, untold)
        if not constant.constant.needs_temperature:
            found.append(None)
            notes.append(
                _none(
                    subject,
                    id_,
                    "one value is stated of its constant, which is the same at every temperature;"
                    " state it 'at' a temperature with the 'enthalpy' of the reaction, as a"
                    " correlation, or from thermochemistry",
                )
            )
            continue
        if len(lacking):
            names = ", ".join(reactions.names[i] for i in lacking.tolist())
            found.append(None)
            notes.append(
                _none(
                    subject,
                    id_,
                    f"the outlet's flow of {names} is within twice its uncertainty of zero, or not"
                    " told by the readings",
                )
            )
            continue
        ln_q = float(nu @ np.where(nu != 0, ln_activities, 0.0))
        slope = nu @ np.where((nu != 0)[:, None], gradients, 0.0)
        variance = max(float(slope @ outlet.covariance @ slope), 0.0)
        if outlet.pressure is not None and constants.phase == "gas":
            variance += (order * outlet.pressure.total_u / outlet.pressure.value) ** 2
        one = _one(constants, j, constant, outlet.temperature, ln_q, variance**0.5)
        if isinstance(one, Note):
            found.append(None)
            notes.append(one)
        else:
            found.append(one)
            notes.extend(constant.notes(one.equilibrium_temperature, subject))
    notes += _remarks_on_gas(constants, outlet, gas, witness, found)
    return tuple(found), tuple(notes)


def _remarks_on_gas(
    constants: StatedConstants,
    outlet: MeasuredOutlet,
    gas: KnownGas | None,
    witness: KnownGas | None,
    found: Sequence[ReactionApproach | None],
) -> Iterator[Note]:
    """Remark on the gas of the outlet as it is, and on constants that its fugacities change."""
    told = np.array([one is not None for one in found])
    known = gas or witness
    if known is None or outlet.pressure is None or not told.any():
        return
    flows, subject = outlet.gas_flows, outlet.subject
    at = outlet.temperature.value, outlet.pressure.value, flows
    yield from known.remarks(*at, taken_as_ideal=gas is None, subject=subject)
    if gas is None:
        ids = [reaction.id for reaction in constants.reactions.reactions]
        ln_phi = known.ln_fugacity_coefficients(*at)
        shift = np.where(told, constants.reactions.nu @ ln_phi, 0.0)
        yield from remark_on_constants(shift[None], ids, subject)


def _activities(
    constants: StatedConstants, outlet: MeasuredOutlet, gas: KnownGas | None
) -> tuple[FloatArray, FloatArray]:
    """Logarithms of activities, shape (S,), and their derivatives by the unknowns, (S, n)."""
    inside: BoolArray = constants.in_mixture
    flows = np.where(inside & (outlet.flows > 0), outlet.flows, np.nan)
    each = np.log(flows)
    gradients = outlet.forms / flows[:, None]
    if constants.phase == "gas":
        assert outlet.pressure is not None
        total = outlet.flows[inside].sum()
        each = each - np.log(total)
        each = each + np.log(outlet.pressure.value / constants.standard_pressure)
        gradients = gradients - outlet.forms[inside].sum(axis=0) / total
        if gas is not None:
            at = outlet.temperature.value, outlet.pressure.value, outlet.gas_flows
            gas.known_compressibility(*at, outlet.subject)
            each = each + gas.ln_fugacity_coefficients(*at)
    elif outlet.volume is not None:
        each = each - np.log(outlet.volume)
        if outlet.volume_form is not None:
            gradients = gradients - outlet.volume_form / outlet.volume
    outside = ~inside
    each[outside], gradients[outside] = 0.0, 0.0
    return each, gradients


def _one(
    constants: StatedConstants,
    j: int,
    constant: EquilibriumConstant,
    temperature: Measurement,
    ln_q: float,
    u: float,
) -> ReactionApproach | Note:
    def ln_k(t: FloatArray) -> FloatArray:
        return constants.one_ln_k(j, t)

    subject = constants.subjects[j]
    found = approach_temperature(
        ln_k, np.array([ln_q]), np.array([temperature.value]), _known(constant), subject
    )
    id_ = constants.reactions.reactions[j].id
    if found.faults:
        fault = found.faults[0]
        return _none(subject, id_, fault.detail, fault.facts)
    t_eq = float(found.equilibrium_temperature[0])
    t = temperature.value
    around = ln_k(np.array([t_eq - _STEP, t_eq + _STEP, t - _STEP, t, t + _STEP]))
    slope = float(around[1] - around[0]) / (2 * _STEP)
    if slope == 0:
        return _none(subject, id_, "its constant does not change with temperature there")
    u_eq = u / abs(slope)
    of_temperature = float(around[4] - around[2]) / (2 * _STEP) * temperature.total_u
    return ReactionApproach(
        float(found.approach[0]),
        float(np.hypot(u_eq, temperature.total_u)),
        t_eq,
        u_eq,
        ln_q - float(around[3]),
        float(np.hypot(u, of_temperature)),
    )


def _known(constant: EquilibriumConstant) -> tuple[float, float]:
    """Return the temperatures between which ln K is known, K."""
    form = constant.constant
    if isinstance(form, ReactionProperties):
        return temperatures_known(form.properties)
    if isinstance(form, LnCorrelation) and form.lowest is not None and form.highest is not None:
        return max(form.lowest - EXTRAPOLATED, COLDEST), form.highest + EXTRAPOLATED
    return COLDEST, HOTTEST


def _none(
    subject: Subject, reaction: str, why: str, facts: Mapping[str, Fact] | None = None
) -> Note:
    return Note(
        "approach-not-known",
        "no approach of {reaction} is given: " + why,
        "warning",
        subject,
        {**(facts or {}), "reaction": reaction},
    )
