"""From the substances of a gas to its equation of state."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from core.arrays import BoolArray, FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Amount, Fault, Note, Refused, Subject, refuse
from core.reactions.reaction_set import ReactionSet
from core.real_gas.condensation import would_condense
from core.real_gas.cubic import CubicEquation, GasModel
from core.real_gas.remarks import remark_on_gas, remark_on_packing
from core.substances.property_data import CriticalConstants, Entry, critical_constants


@dataclass(frozen=True, eq=False)
class KnownGas:
    """An equation of state, and what its substances were taken for.

    Attributes
    ----------
    equation : CubicEquation
        Of the substances in the gas, in order.
    constants : Mapping from name to (Entry or None, CriticalConstants)
    in_gas : ndarray of bool, shape (S,)
        Which of all substances those are.
    """

    equation: CubicEquation
    constants: Mapping[str, tuple[Entry | None, CriticalConstants]]
    in_gas: BoolArray

    def _inside(self, flows: FloatArray) -> FloatArray:
        # An estimate may leave a trace of less than nothing.
        inside: FloatArray = np.maximum(flows[..., self.in_gas], 0.0)
        return np.where(inside.sum(axis=-1, keepdims=True) > 0, inside, np.nan)

    def compressibility(
        self,
        temperature: float | FloatArray,
        pressure: float | FloatArray,
        flows: FloatArray,
    ) -> FloatArray:
        """Return Z of a gas, shape (...); not a number where it is none.

        Parameters
        ----------
        temperature, pressure : float or ndarray, shape (...)
            K and Pa.
        flows : ndarray, shape (..., S)
            Of all substances, in any unit; those outside the gas do not count.
        """
        t, p, inside = self._rows(temperature, pressure, flows)
        z = self.equation.compressibility_of_gas(t, p, inside)
        return z.reshape(flows.shape[:-1])

    def ln_fugacity_coefficients(
        self,
        temperature: float | FloatArray,
        pressure: float | FloatArray,
        flows: FloatArray,
    ) -> FloatArray:
        """Return ln of the fugacity coefficients of a gas, shape (..., S); 0 outside it.

        Arguments as of :meth:`compressibility`.
        """
        t, p, inside = self._rows(temperature, pressure, flows)
        found = np.zeros((len(t), len(self.in_gas)))
        state = self.equation.state(t, p, inside, of_gas=True)
        found[:, self.in_gas] = state.ln_fugacity_coefficients
        return found.reshape(flows.shape)

    def _rows(
        self, temperature: float | FloatArray, pressure: float | FloatArray, flows: FloatArray
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        lead = flows.shape[:-1]
        return (
            np.broadcast_to(temperature, lead).reshape(-1),
            np.broadcast_to(pressure, lead).reshape(-1),
            self._inside(flows).reshape(-1, np.count_nonzero(self.in_gas)),
        )

    def known_compressibility(
        self,
        temperature: float | FloatArray,
        pressure: float | FloatArray,
        flows: FloatArray,
        subject: Subject,
    ) -> FloatArray:
        """Return :meth:`compressibility`, shape (...).

        Raises
        ------
        Refused
            ``not-a-gas``.
        """
        z = self.compressibility(temperature, pressure, flows)
        if not np.isfinite(z).all():
            row = np.unravel_index(int(np.argmin(np.isfinite(z))), z.shape)
            raise refuse(
                "not-a-gas",
                subject,
                "at {temperature} and {pressure} the equation of state has this fluid as a liquid"
                " only: correct temperature, pressure or composition, or declare the phase of what"
                " is condensed under 'species'",
                temperature=Amount(
                    float(np.broadcast_to(temperature, z.shape)[row]), "temperature"
                ),
                pressure=Amount(float(np.broadcast_to(pressure, z.shape)[row]), "pressure"),
            )
        return z

    def pressure(
        self,
        temperature: float | FloatArray,
        volume: float | FloatArray,
        flows: FloatArray,
        subject: Subject,
    ) -> FloatArray:
        """Return the pressure of a gas in a volume, Pa, shape (...).

        Parameters
        ----------
        temperature, volume : float or ndarray, shape (...)
            K, and m3/s beside mol/s, or m3 beside mol.
        flows : ndarray, shape (..., S)
        subject : Subject

        Raises
        ------
        Refused
            ``not-a-gas`` where so much does not go into the volume as a gas.
        """
        lead = flows.shape[:-1]
        t, v, inside = self._rows(temperature, volume, flows)
        with np.errstate(invalid="ignore"):
            found = self.equation.pressure(t, v, inside)
            of_volume = found * v / (inside.sum(axis=-1) * GAS_CONSTANT * t)
            held = np.where(found > 0, found, np.nan)
        z = self.equation.compressibility_of_gas(t, held, inside)
        # Inside the loop of an isotherm a volume has a pressure, and no gas that keeps it.
        good = np.abs(z - of_volume) <= 1e-6 * of_volume
        if not good.all():
            row = int(np.argmin(good))
            raise refuse(
                "not-a-gas",
                subject,
                "by the equation of state {amount} do not go into {volume} at {temperature} as one"
                " gas: part of it would be liquid. State a larger volume, a higher temperature or"
                " less of the gas",
                amount=Amount(float(inside[row].sum()), "amount"),
                volume=Amount(float(v[row]), "volume"),
                temperature=Amount(float(t[row]), "temperature"),
            )
        return found.reshape(lead)

    def remarks(
        self,
        temperature: float | FloatArray,
        pressure: float | FloatArray,
        flows: FloatArray,
        *,
        taken_as_ideal: bool,
        subject: Subject,
    ) -> Iterator[Note]:
        """Remark on a gas in one or several states; arguments as of :meth:`compressibility`."""
        t, p, inside = self._rows(temperature, pressure, flows)
        z = self.equation.compressibility_of_gas(t, p, inside)
        yield from remark_on_gas(
            z,
            would_condense(self.equation, t, p, inside),
            taken_as_ideal=taken_as_ideal,
            subject=subject,
        )
        if not taken_as_ideal:
            packing = self.equation.packing(t, p, inside, z)
            yield from remark_on_packing(packing, np.asarray(p), subject)


def gas_of(
    model: GasModel,
    reactions: ReactionSet,
    in_gas: BoolArray,
    subject_of: Callable[[str], Subject],
    interactions: Mapping[tuple[int, int], float] | None = None,
) -> KnownGas:
    """Return the equation of state of a gas.

    Parameters
    ----------
    model : GasModel
    reactions : ReactionSet
    in_gas : ndarray of bool, shape (S,)
    subject_of : callable
        What a refusal is about, by a substance's name.
    interactions : Mapping, optional
        k_ij by positions among all substances; a pair left out has none.

    Raises
    ------
    Refused
        With a fault for each substance whose constants are not known; see
        :func:`~core.substances.property_data.critical_constants`.
    """
    found: dict[str, tuple[Entry | None, CriticalConstants]] = {}
    faults: list[Fault] = []
    inside = np.flatnonzero(in_gas).tolist()
    for i in inside:
        substance = reactions.substances[i]
        try:
            found[substance.name] = critical_constants(substance, subject_of(substance.name))
        except Refused as refused:
            faults += refused.faults
    if faults:
        raise Refused(faults)
    place = {i: k for k, i in enumerate(inside)}
    between = np.zeros((len(inside), len(inside)))
    for (i, j), k in (interactions or {}).items():
        if i in place and j in place:
            between[place[i], place[j]] = between[place[j], place[i]] = k
    each = [constants for _, constants in found.values()]
    return KnownGas(
        CubicEquation(
            model,
            np.array([c.temperature for c in each]),
            np.array([c.pressure for c in each]),
            np.array([c.acentric_factor for c in each]),
            between,
        ),
        found,
        np.asarray(in_gas),
    )
