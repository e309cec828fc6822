"""Enthalpy, entropy and equilibrium constant of reactions over temperature.

The standard states are the pure ideal gas, the pure liquid and the pure solid
at 1 bar (IUPAC, 1982), so that the equilibrium constant is the thermodynamic
one of gases counted in bar::

    ln K = -(dH - T dS)/(R T)
    dH = sum nu_i [H_i(298.15 K) + integral of C_p,i dT]
    dS = sum nu_i [S_i(298.15 K) + integral of C_p,i/T dT]

with the integrals exact for each form of heat capacity (J. M. Smith, H. C. Van
Ness, M. M. Abbott, Introduction to Chemical Engineering Thermodynamics, 7th
ed., McGraw-Hill, 2005, ch. 4 and 13: from memory).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Amount, Fault, Note, Refused, Subject
from core.numerics.straight_line import array_or_symbol, is_symbol
from core.rates.constants import Values, needed_temperature
from core.reactions.reaction_set import ReactionSet
from core.substances.property_data import STATED, WANTED, StandardProperties, standard_properties
from core.substances.substance import Phase, Substance

EXTRAPOLATED = 100.0
"""K beyond the range of a heat capacity that are still answered, with a warning."""

DISAGREEMENT = 0.25
"""Spread of ln K, from the sources' differences, that is worth a warning: 28 % of K."""

LEAST_TEMPERATURE, MOST_TEMPERATURE = 50.0, 6000.0
"""K; where the caller's own heat capacities, which have no range, are still believed."""


@dataclass(frozen=True, eq=False)
class ReactionProperties:
    """One reaction as written, with the standard properties of its substances.

    As a form of equilibrium constant (:meth:`ln_at`) it is thermodynamic, for
    gases in units of 1 bar.

    Attributes
    ----------
    coefficients : tuple of float
        Of the substances, products above zero.
    properties : tuple of StandardProperties
        In the same order.
    """

    coefficients: tuple[float, ...]
    properties: tuple[StandardProperties, ...]
    needs_temperature: ClassVar[bool] = True

    def enthalpy(self, temperature: float | FloatArray) -> FloatArray:
        """Enthalpy of reaction per mole of extent, J/mol, shape of ``temperature`` (K)."""
        t = array_or_symbol(temperature)
        total: FloatArray = self.enthalpy_at_reference + 0.0 * t
        for nu, p in self._pairs():
            assert p.heat_capacity is not None
            total = total + nu * p.heat_capacity.enthalpy(t)
        return total

    @property
    def enthalpy_at_reference(self) -> float:
        """Enthalpy of reaction at 298.15 K, J/mol."""
        total = 0.0
        for nu, p in self._pairs():
            assert p.enthalpy is not None
            total += nu * p.enthalpy
        return total

    @property
    def entropy_at_reference(self) -> float:
        """Entropy of reaction at 298.15 K and 1 bar, J/(mol K)."""
        absolute = [p.entropy for p in self.properties]
        formation = [p.entropy_of_formation for p in self.properties]
        # The elements cancel, so either set will do; the first loses no digits.
        each = absolute if None not in absolute else formation
        return float(sum(nu * s for nu, s in zip(self.coefficients, each, strict=True) if s))

    def entropy(self, temperature: float | FloatArray) -> FloatArray:
        """Entropy of reaction at 1 bar, J/(mol K), shape of ``temperature`` (K)."""
        t = array_or_symbol(temperature)
        total: FloatArray = self.entropy_at_reference + 0.0 * t
        for nu, p in self._pairs():
            assert p.heat_capacity is not None
            total = total + nu * p.heat_capacity.entropy(t)
        return total

    def heat_capacity(self, temperature: float | FloatArray) -> FloatArray:
        """Change of heat capacity, J/(mol K), shape of ``temperature`` (K)."""
        t = np.asarray(temperature, dtype=float)
        total = np.zeros_like(t)
        for nu, p in self._pairs():
            assert p.heat_capacity is not None
            total += nu * p.heat_capacity.at(t)
        return total

    def gibbs(self, temperature: float | FloatArray) -> FloatArray:
        """Standard Gibbs energy of reaction, J/mol, shape of ``temperature`` (K)."""
        t = array_or_symbol(temperature)
        gibbs: FloatArray = self.enthalpy(t) - t * self.entropy(t)
        return gibbs

    def ln_at(self, temperature: Values | None, subject: Subject = ()) -> FloatArray:
        """Return ln K at the temperature, K, shape (...).

        Raises
        ------
        Refused
            ``condition-missing``, ``outside-correlation``.
        """
        t = needed_temperature(temperature)
        if not is_symbol(t):
            self.check_range(t, subject)
        ln: FloatArray = -self.gibbs(t) / (GAS_CONSTANT * t)
        return ln

    def check_range(self, temperature: FloatArray, subject: Subject) -> None:
        """Refuse temperatures that a heat capacity says nothing about."""
        faults = beyond_range(self.properties, temperature, subject)
        if faults:
            raise Refused(faults)

    def spread(self, temperature: float | FloatArray) -> FloatArray:
        """How far ln K may be off for the sources' differences, shape of ``temperature`` (K).

        The largest differences of enthalpies and entropies between collections,
        as independent errors.
        """
        t = np.asarray(temperature, dtype=float)
        h = sum((nu * p.spreads.get("enthalpy", 0.0)) ** 2 for nu, p in self._pairs())
        s = sum((nu * p.spreads.get("entropy", 0.0)) ** 2 for nu, p in self._pairs())
        return np.sqrt(h / (GAS_CONSTANT * t) ** 2 + s / GAS_CONSTANT**2)

    def assumed(self, temperature: float, subject: Subject) -> tuple[Note, ...]:
        """Return how K was found at a temperature (K)."""
        at = np.asarray(temperature)
        return (
            Note(
                "equilibrium-constant-from-properties",
                "ln K is {ln_k} at {temperature} (ideal gases at 1 bar), and the enthalpy of"
                " reaction {enthalpy} per mole of extent, from enthalpies of formation, entropies"
                " and heat capacities of {names}",
                subject=subject,
                facts={
                    "ln_k": f"{float(self.ln_at(at, subject)):.6g}",
                    "temperature": Amount(temperature, "temperature"),
                    "enthalpy": Amount(float(self.enthalpy(at)), "molar_energy"),
                    "names": ", ".join(_taken_for(p) for p in self.properties),
                },
            ),
        )

    def notes(self, temperature: float, subject: Subject) -> tuple[Note, ...]:
        """Return what the reader of a K at a temperature (K) must know."""
        t = Amount(temperature, "temperature")
        found = []
        spread = float(self.spread(temperature))
        if spread > DISAGREEMENT:
            found.append(
                Note(
                    "sources-disagree",
                    "well-known collections differ on the enthalpies and entropies behind K, so"
                    " that ln K may be off by {spread} at {temperature}; 'provenance' has each"
                    " value's source and spread: state what you trust under 'species', or K",
                    "warning",
                    subject,
                    {"spread": f"{spread:.2g}", "temperature": t},
                )
            )
        return (
            *found,
            *contradictions(self.properties),
            *extrapolations(self.properties, np.asarray(temperature), subject),
        )

    def _pairs(self) -> list[tuple[float, StandardProperties]]:
        return list(zip(self.coefficients, self.properties, strict=True))


def _taken_for(p: StandardProperties) -> str:
    if p.name is None:
        return f"{p.substance} ({STATED})"
    return f"{p.substance} (as {p.name}, {p.registry_number}, {p.phase})"


def _range_of(p: StandardProperties) -> dict[str, str | Amount]:
    cp = p.heat_capacity
    assert cp is not None
    return {
        "substance": p.substance,
        "lowest": Amount(cp.lowest, "temperature"),
        "highest": Amount(cp.highest, "temperature"),
        "source": p.sources["heat_capacity"],
    }


_FIELDS = {
    "enthalpy": ("enthalpy of formation", "enthalpy_of_formation", "molar_energy"),
    "gibbs": ("Gibbs energy of formation", "gibbs_of_formation", "molar_energy"),
    "entropy": ("entropy", "entropy", "molar_heat_capacity"),
    "heat_capacity": ("heat capacity", "heat_capacity", "molar_heat_capacity"),
}


def contradictions(properties: Sequence[StandardProperties]) -> tuple[Note, ...]:
    """Return a warning for each value that is stated and that the packaged tables contradict."""
    found = []
    for p in properties:
        for of in p.contradictions:
            words, name, dimension = _FIELDS[of.what]
            at = f"at {of.at:g} K"
            sign = of.what in ("enthalpy", "gibbs") and abs(of.stated + of.tabled) < 0.05 * abs(
                of.tabled
            )
            found.append(
                Note(
                    "stated-data-contradict-tables",
                    f"the {words} stated of {{substance}} is {{stated}}, and the packaged tables"
                    f" have {{tabled}} of {{compared}} {at} ({{source}}). What is stated was taken;"
                    " check its "
                    + ("sign" if sign else "sign, unit and phase")
                    + ", or say by 'name' or 'registry_number' which other substance it is",
                    "warning",
                    ("species", p.substance, name),
                    {
                        "substance": p.substance,
                        "stated": Amount(of.stated, dimension),
                        "tabled": Amount(of.tabled, dimension),
                        "compared": str(p.compared_with),
                        "source": of.source,
                    },
                )
            )
    return tuple(found)


def extrapolations(
    properties: Sequence[StandardProperties], temperature: FloatArray, subject: Subject
) -> tuple[Note, ...]:
    """Return a warning for each heat capacity that temperatures, K, lie outside the range of."""
    found = []
    each = np.atleast_1d(temperature)
    for p in properties:
        cp = p.heat_capacity
        assert cp is not None
        beyond = [cp.beyond(t) for t in each]
        farthest = int(np.argmax(beyond))
        if beyond[farthest] > 0:
            found.append(
                Note(
                    "property-data-extrapolated",
                    "the heat capacity of {substance} holds from {lowest} to {highest}"
                    " ({source}); at {temperature} it was taken as it is at the end of that"
                    " range",
                    "warning",
                    subject,
                    {
                        **_range_of(p),
                        "temperature": Amount(float(each[farthest]), "temperature"),
                    },
                )
            )
    return tuple(found)


def beyond_range(
    properties: Sequence[StandardProperties], temperature: FloatArray, subject: Subject
) -> list[Fault]:
    """Return a fault for each heat capacity too far outside whose range a temperature lies."""
    faults = []
    t = np.asarray(temperature, dtype=float)
    for p in properties:
        cp = p.heat_capacity
        assert cp is not None
        if cp.beyond(t) > EXTRAPOLATED:
            worst = t.max() if t.max() > cp.highest + EXTRAPOLATED else t.min()
            faults.append(
                Fault(
                    "outside-correlation",
                    subject,
                    "the heat capacity of {substance} is known from {lowest} to {highest}"
                    " ({source}), and is used up to {most} beyond; {temperature} is asked for."
                    " State 'heat_capacity' of {substance} under 'species', or another"
                    " temperature.",
                    {
                        **_range_of(p),
                        "most": Amount(EXTRAPOLATED, "temperature_difference"),
                        "temperature": Amount(float(worst), "temperature"),
                    },
                )
            )
        elif not cp.bounded and not _believed(t):
            worst = t.max() if t.max() > MOST_TEMPERATURE else t.min()
            faults.append(
                Fault(
                    "outside-correlation",
                    subject,
                    "the stated heat capacity of {substance} is used from {lowest} to {highest},"
                    " and {temperature} is asked for; check the temperature.",
                    {
                        "substance": p.substance,
                        "lowest": Amount(LEAST_TEMPERATURE, "temperature"),
                        "highest": Amount(MOST_TEMPERATURE, "temperature"),
                        "temperature": Amount(float(worst), "temperature"),
                    },
                )
            )
        elif p.sources["heat_capacity"] == STATED and not (cp.at(t) > 0).all():
            faults.append(
                Fault(
                    "impossible-value",
                    subject,
                    "the heat capacity stated of {substance} is not above zero at {temperature};"
                    " check its coefficients and their unit.",
                    {
                        "substance": p.substance,
                        "temperature": Amount(float(t.flat[np.argmin(cp.at(t))]), "temperature"),
                    },
                )
            )
    return faults


def _believed(t: FloatArray) -> bool:
    return bool(t.min() >= LEAST_TEMPERATURE and t.max() <= MOST_TEMPERATURE)


def properties_of(
    substances: Sequence[Substance],
    phase: Phase,
    subject_of: Callable[[str], Subject],
    wanted: tuple[str, ...] = WANTED,
) -> tuple[StandardProperties, ...]:
    """Return the standard properties of several substances.

    Parameters
    ----------
    substances : sequence of Substance
    phase : Phase
        Of the stream they are in; their own win.
    subject_of : callable
        What a refusal is about, by a substance's name.
    wanted : tuple of str
        See :func:`~core.substances.property_data.standard_properties`.

    Raises
    ------
    Refused
        With a fault for each substance at fault.
    """
    found: list[StandardProperties] = []
    faults: list[Fault] = []
    for substance in substances:
        try:
            found.append(standard_properties(substance, phase, subject_of(substance.name), wanted))
        except Refused as refused:
            faults += refused.faults
    if faults:
        raise Refused(faults)
    return tuple(found)


def reaction_properties(
    reactions: ReactionSet,
    reaction: int,
    phase: Phase,
    subject: Subject,
    places: Mapping[str, Subject] | None = None,
) -> ReactionProperties:
    """Return the standard properties of one reaction.

    Parameters
    ----------
    reactions : ReactionSet
    reaction : int
    phase : Phase
        Of the stream it runs in.
    subject : Subject
        What a refusal is about.
    places : Mapping[str, Subject], optional
        By name of a substance, what a refusal of its own is about.

    Raises
    ------
    Refused
        See :func:`~core.substances.property_data.standard_properties`;
        ``property-data-missing`` too where entropies have no common zero.
    """
    nu = reactions.nu[reaction]
    reacting = [i for i in range(len(nu)) if nu[i]]
    where = places or {}
    properties = properties_of(
        [reactions.substances[i] for i in reacting], phase, lambda name: where.get(name, subject)
    )
    made = ReactionProperties(tuple(float(nu[i]) for i in reacting), properties)
    absolute = all(p.entropy is not None for p in properties)
    lacking = [p for p in properties if p.entropy_of_formation is None]
    if not absolute and lacking:
        raise Refused(
            [
                Fault(
                    "property-data-missing",
                    where.get(p.substance, subject),
                    "the entropy of {substance}, which has no formula, and the Gibbs energies of"
                    " formation stated for others do not count from the same zero; state"
                    " 'gibbs_of_formation' of {substance} too, or 'entropy' of the others.",
                    {"substance": p.substance},
                )
                for p in lacking
            ]
        )
    return made
