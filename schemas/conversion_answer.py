"""The answer to a conversion request: the account that fits best, and what it says."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import partial
from typing import Any, TypeAlias

import numpy as np
from marshmallow import fields
from scipy.special import ndtri

from core.arrays import BoolArray, FloatArray
from core.constants import GAS_CONSTANT
from core.errors import Note
from core.mole_account.stoichiometric_table import CONSTANT_DENSITY
from core.outlet_analysis.closure import Closures
from core.outlet_analysis.conversion import ConversionResults, Overall
from core.outlet_analysis.estimate import Estimate, ReadingTable
from core.outlet_analysis.ratios import Uncertain
from core.outlet_analysis.space_time_yield import SizeBasis, SpaceTimeYields
from core.real_gas.witness import witness_of
from core.streams.known import Conditions, in_phase, solids_taken_as_gas
from core.substances.property_data import PACKAGED
from schemas.answer import ATOMIC_WEIGHTS, Answer
from schemas.conversion import ConversionQuestion
from schemas.edge import EdgeMap, Json
from schemas.feed import (
    MeteredStreamResultSchema,
    StreamResultSchema,
    words_of,
    write_stream,
)
from schemas.fields import describe
from schemas.gas_model import gas_words, write_gas
from schemas.results import NumberSchema, OpenSchema, envelope, number, numbers_by_name

Drawn: TypeAlias = Callable[[FloatArray], FloatArray]
"""Makes the flows of a stream (K, S) of unknowns (K, n)."""


class RatioSchema(NumberSchema):
    """A yield or a selectivity, and what it counts by."""

    basis = fields.String(required=True, metadata=describe("", enum=["key", "element"]))
    element = fields.String(metadata=describe("On element basis."))
    factor = number("Key equivalents per mole of product.", required=True)


class SpaceTimeYieldSchema(NumberSchema):
    """Moles of a product made by the size of the reactor and time."""

    basis = fields.String(
        required=True, metadata=describe("", enum=["reactor-volume", "catalyst-mass"])
    )


class ClosureSchema(OpenSchema):
    """An element in and out, by the readings as they were taken."""

    in_ = fields.Nested(
        NumberSchema, data_key="in", required=True, allow_none=True, metadata=describe("Fed.")
    )
    out = number("Leaving.", required=True)
    ratio = number("Out over in.", required=True)


class ReconciledReadingSchema(OpenSchema):
    """A reading beside what the account makes of it."""

    reading = fields.String(required=True, metadata=describe("Its JSON Pointer in the request."))
    measured = number("As it was read, with its uncertainty.", required=True)
    reconciled = number("With the uncertainty that the whole account leaves.", required=True)
    adjustment_over_u = number(
        "(measured - reconciled)/sqrt(u^2 - u_reconciled^2): standard normal where nothing is"
        " wrong; null without redundancy."
    )
    measurement_test = number(
        "Of a reading whose error is correlated with another's: what it is tested by in place of"
        " adjustment_over_u, the test of greatest power (Tamhane and Mah, 1985); standard normal"
        " where nothing is wrong."
    )
    redundancy = number("0: no other reading checks it; 1: it is known from the others.")
    smallest_detectable_error = number(
        "An error of this size takes the reading's own test beyond 1.96, where one in twenty sound"
        " readings is too, nine times in ten; suspects are named at a higher limit, which all tests"
        " share. Null without redundancy."
    )
    suspect = fields.Boolean(required=True)
    bound = fields.String(
        metadata=describe(
            "Of a limit: the reconciled value against it.", enum=["within-limit", "beyond-limit"]
        )
    )


class ReconciliationSchema(OpenSchema):
    """How well the readings agree with each other."""

    degrees_of_freedom = fields.Integer(required=True)
    chi_square = number(required=True)
    limit = number("Exceeded once in twenty by good readings; null without redundancy.")
    p_value = number("Null without redundancy.")
    consistent = fields.Boolean(required=True, allow_none=True)
    readings = fields.List(fields.Nested(ReconciledReadingSchema), required=True)
    suspects = fields.List(
        fields.List(fields.String()),
        required=True,
        metadata=describe("Readings in doubt; those of one list cannot be told apart."),
    )


class AlternativeSchema(OpenSchema):
    """The answer with some readings left out."""

    removed = fields.List(fields.String(), required=True)
    conversion = number(required=True)
    overall_conversion = number("With a recycle.")
    chi_square = number("Of what is left.")


class WithoutSuspectSchema(AlternativeSchema):
    """The answer with the suspect readings left out."""

    alternatives = fields.List(
        fields.Nested(AlternativeSchema),
        metadata=describe("The other ways to choose among readings that cannot be told apart."),
    )


class UncertaintyResultSchema(OpenSchema):
    """How uncertainty was carried through, where it was drawn.

    That is by Monte Carlo in all numbers but those of the reconciliation and
    without_suspect. Their value is the estimate from the readings.
    """

    method = fields.String(required=True, metadata=describe("", enum=["monte-carlo"]))
    coverage = fields.Float(required=True)
    draws = fields.Integer(required=True)
    seed = fields.Integer(required=True, metadata=describe("Stated, or the default."))
    left_out = fields.Integer(
        required=True, metadata=describe("Draws that have no account, which nothing counts.")
    )


class OverallSchema(OpenSchema):
    """A reactor with recycle and all around it: what leaves against the fresh feed."""

    conversion = number(
        "Net, of the key: (fresh - leaving in product and purge)/fresh.", required=True
    )
    yields = numbers_by_name(
        RatioSchema, "By product, per key in the fresh feed; selectivities are the reactor's."
    )
    recycle_ratio = number(
        "Moles returned to the reactor inlet over moles leaving in product and purge.",
        required=True,
    )
    fresh_feed = fields.Nested(StreamResultSchema, required=True)
    recycle = fields.Nested(MeteredStreamResultSchema, required=True)
    purge = fields.Nested(MeteredStreamResultSchema, metadata=describe("Where there is one."))
    product = fields.Nested(StreamResultSchema, metadata=describe("Where there is one."))
    closure = numbers_by_name(ClosureSchema, "By element: what leaves over the fresh feed.")


class ConversionResult(OpenSchema):
    """The account that fits the readings best."""

    conversion = number("Net, of the key.", required=True)
    extents = numbers_by_name(text="By reaction; null where dependent reactions leave them open.")
    inlet = fields.Nested(StreamResultSchema, required=True)
    outlet = fields.Nested(StreamResultSchema, required=True)
    gas_model = fields.String(metadata=describe("Where it is not ideal."))
    key_consumed_by = numbers_by_name(text="Share of each consuming reaction.")
    key_produced_by = numbers_by_name(text="Share of each producing reaction, of what is consumed.")
    yields = numbers_by_name(RatioSchema, "By product, per key fed.")
    selectivities = numbers_by_name(RatioSchema, "By product, per key converted.")
    space_time_yields = numbers_by_name(
        SpaceTimeYieldSchema,
        "By product, its own moles made by the size of the reactor and time; where 'reactor' is"
        " stated.",
    )
    closure = numbers_by_name(ClosureSchema, "By element.")
    overall = fields.Nested(OverallSchema, metadata=describe("With a recycle."))
    reconciliation = fields.Nested(ReconciliationSchema, required=True)
    without_suspect = fields.Nested(WithoutSuspectSchema)
    uncertainty = fields.Nested(UncertaintyResultSchema, metadata=describe("Of monte-carlo."))


ConversionAnswer = envelope("ConversionAnswer", ConversionResult)


RATES: dict[SizeBasis, str] = {
    "reactor-volume": "reaction_rate",
    "catalyst-mass": "reaction_rate_per_mass",
}
"""Dimension of a space-time yield, by what it counts by."""

ASSUMED = frozenset({"per-mole-of-key", "outlet-placement", "removed-taken-as-absent"})
"""Notes of the core that are assumptions."""

ESTIMATION = "weighted least squares on the mole account in extents of reaction; "
METHOD = ESTIMATION + "linear propagation of uncertainty (GUM, JCGM 100:2008)"
BY_DRAWS = ESTIMATION + "propagation of distributions by Monte Carlo (JCGM 101:2008)"


def write(
    question: ConversionQuestion, found: Estimate, results: ConversionResults, edge: EdgeMap
) -> Answer:
    """Return the answer that holds an estimate and what it says of the reactor."""
    return _Writer(question, found, results, edge).answer()


class _Writer:
    def __init__(
        self,
        question: ConversionQuestion,
        found: Estimate,
        results: ConversionResults,
        edge: EdgeMap,
    ) -> None:
        self.question, self.found, self.results = question, found, results
        self.problem = question.problem
        self.reactions = self.problem.reactions
        # Limits are told in the units of the request, flows per mole of key where none is known.
        self.edge = edge.per_mole_of_key() if found.per_mole_of_key else edge
        self.coverage = self.problem.coverage
        self.factor = float(ndtri(0.5 + self.coverage / 2))
        self.flow = words_of(self.problem.batch).flow_dimension
        self.assumed: list[Note] = []
        self.notes: list[Note] = []

    def answer(self) -> Answer:
        found, results, account = self.found, self.results, self.found.account
        gas = self.question.gas
        ids = [reaction.id for reaction in self.reactions.reactions]
        result: Json = {
            "conversion": self._number(results.conversion),
            "extents": self._by(ids, results.extents, self.flow),
            "inlet": self._side("feed", found.feed_flows, account.feed_map, account.inlet),
            "outlet": self._side("outlet", found.outlet_flows, account.outlet_map, account.outlet),
        }
        if gas is not None:
            result["gas_model"] = gas.equation.model
        for name in ("key_consumed_by", "key_produced_by"):
            shares: Uncertain | None = getattr(results, name)
            if shares is not None:
                there = {i: x for i, x in zip(ids, self._each(shares), strict=True) if x}
                result[name] = there
        result["yields"] = self._ratios(results.yields.yields)
        result["selectivities"] = self._ratios(results.yields.selectivities)
        if results.space_time_yields is not None:
            result["space_time_yields"] = self._space_time_yields(results.space_time_yields)
        if results.closures is not None:
            result["closure"] = self._closure(results.closures)
        if results.overall is not None:
            result["overall"] = self._overall(results.overall)
        result["reconciliation"] = write_reconciliation(self.edge, found)
        if results.without_suspects:
            result["without_suspect"] = self._without_suspect()
        draws = results.draws
        if draws is not None:
            result["uncertainty"] = {
                "method": "monte-carlo",
                "coverage": draws.coverage,
                "draws": draws.sampling.draws,
                "seed": draws.sampling.seed,
                "left_out": draws.left_out,
            }
        notes, assumed = self.notes, self.assumed
        for note in (*self.edge.read_notes, *found.notes, *results.notes):
            (assumed if note.code in ASSUMED else notes).append(note)
        for phase in sorted({stream.phase for stream in self.problem.outlet}):
            notes.extend(solids_taken_as_gas(self.reactions, phase))
        if found.inconsistent:
            notes.append(INCONSISTENT)
        defaults = self.question.readings.readings.default_notes(set(found.readings.subjects))
        return Answer(
            result=result,
            notes=self.edge.notes(notes),
            assumed=self.edge.notes((*self.edge.read_assumed, *defaults, *assumed)),
            method=(METHOD if draws is None else BY_DRAWS) + gas_words(gas),
            data=ATOMIC_WEIGHTS if gas is None else f"{ATOMIC_WEIGHTS}; {PACKAGED}",
            properties=None if gas is None else write_gas(self.edge, gas, {}),
        )

    def _number(self, of: Uncertain, dimension: str = "dimensionless") -> Json | None:
        value, u = float(of.value), float(of.u)
        if not np.isfinite(value):
            return None
        ends = None
        if of.low is not None and of.high is not None:
            ends = (float(of.low), float(of.high))
        return self.edge.uncertain(
            value, u, dimension, coverage=self.coverage, factor=self.factor, ends=ends
        )

    def _each(self, of: Uncertain, dimension: str = "dimensionless") -> list[Json | None]:
        one = (of.each(lambda values, k=k: values[k]) for k in range(len(of.value)))  # type: ignore[misc]
        return [self._number(number_, dimension) for number_ in one]

    def _by(self, names: Sequence[str], of: Uncertain | None, dimension: str) -> Json:
        if of is None:
            return dict.fromkeys(names)
        return dict(zip(names, self._each(of, dimension), strict=True))

    def _side(
        self,
        side: str,
        flows: FloatArray,
        forms: FloatArray,
        streams: range,
        drawn: Drawn | None = None,
    ) -> Json:
        """Return what flows on one side, and each of its streams where there are several.

        ``drawn`` makes its flows of unknowns where they are not linear forms of them.
        """
        drawn = drawn or (lambda z: z @ forms.T)
        conditions = self.question.conditions[side]
        volume = None
        if conditions is not None and conditions.phase == "liquid":
            volume = self._liquid_volume(side, streams)
        stream = self._stream(flows, forms, drawn, conditions, volume)
        if len(streams) > 1:
            stream["streams"] = {self.question.stream_ids[g]: self._one(g) for g in streams}
        return stream

    def _overall(self, of: Overall) -> Json:
        found, account = self.found, self.found.account
        fresh = range(len(self.problem.feed))
        said: Json = {
            "conversion": self._number(of.conversion),
            "yields": self._ratios(of.yields),
            "recycle_ratio": self._number(of.recycle_ratio),
            "fresh_feed": self._side("fresh_feed", found.fresh_flows, account.fresh_map, fresh),
            "recycle": self._one(account.returned),
        }
        if account.purge is not None:
            said["purge"] = self._one(account.purge)
        if account.products:
            said["product"] = self._side(
                "product",
                found.product_flows,
                found.product_forms,
                account.products,
                account.product_flows,
            )
        if of.closures is not None:
            said["closure"] = self._closure(of.closures)
        return said

    def _one(self, g: int) -> Json:
        metered = self.found.account.streams[g]
        volume = None
        if metered.phase == "liquid":
            volume = _told(self.found.liquid_volume([g]))
        conditions = Conditions(
            metered.phase,
            metered.subject,
            metered.temperature,
            metered.pressure,
            float(metered.compressibility),
            real=metered.real,
        )
        return self._stream(
            self.found.stream_flows(g),
            self.found.stream_forms(g),
            partial(self.found.account.stream_flows, g),
            conditions,
            volume,
        )

    def _stream(
        self,
        flows: FloatArray,
        forms: FloatArray,
        drawn: Drawn,
        conditions: Conditions | None,
        volume: float | None,
    ) -> Json:
        names = self.reactions.names
        told = np.isfinite(flows)
        inside = None if conditions is None else in_phase(self.reactions, conditions.phase)
        if inside is not None and told.all() and not flows[inside].sum() > TINY * abs(flows).sum():
            # Nothing is left in the phase, so nothing is a fraction of it.
            self._note(NOTHING_IN_PHASE)
            inside = conditions = None
        if not told.all():
            # How a substance is shared out is open, so no total and no fraction is known.
            names = tuple(name for name, there in zip(names, told, strict=True) if there)
            flows, forms, inside, conditions = flows[told], forms[told], None, None
        temperature = pressure = None
        z = 1.0
        if conditions is not None:
            z = conditions.compressibility
            temperature = None if conditions.temperature is None else conditions.temperature.value
            pressure = None if conditions.pressure is None else conditions.pressure.value
            if conditions.phase == "gas" and temperature is not None and pressure is not None:
                found = self._compressibility(conditions, temperature, pressure, flows)
                if np.isfinite(found):
                    z, total = found, float(flows[inside].sum())
                    volume = total * z * GAS_CONSTANT * temperature / pressure
                else:
                    self._note(NO_GAS)
            if volume is None and NO_GAS not in self.notes:
                self._note(NO_CONCENTRATIONS)
        spread = self._spread(flows, forms, drawn, told)
        intervals = None
        if spread.low is not None and spread.high is not None:
            intervals = (spread.low, spread.high, self.coverage)
        stream = write_stream(
            self.edge,
            names,
            flows,
            inside,
            batch=self.problem.batch,
            volume=volume,
            temperature=temperature,
            pressure=pressure,
            compressibility=z,
            u=spread.u[:-1],
            total_u=float(spread.u[-1]),
            intervals=intervals,
        )
        if not told.all():
            stream["total"] = None
            self._note(DISTRIBUTION)
        return stream

    def _spread(
        self, flows: FloatArray, forms: FloatArray, drawn: Drawn, told: BoolArray
    ) -> Uncertain:
        """Return the flows of a stream that are told, and their total, with uncertainties."""
        every = np.concatenate([flows, [flows.sum()]])
        draws = self.results.draws
        if draws is None:
            return Uncertain(
                every, self.found.u_of(np.concatenate([forms, forms.sum(axis=0)[None]]))
            )
        of_draws = drawn(draws.z)[:, told]
        return draws.spread(every, np.column_stack([of_draws, of_draws.sum(axis=1)]))

    def _compressibility(
        self, of: Conditions, temperature: float, pressure: float, flows: FloatArray
    ) -> float:
        """Return Z of a gas, and remark on it; not a number where the gas model has no gas."""
        gas, inside = self.question.gas, in_phase(self.reactions, "gas")
        subject = of.subject
        within = np.where(inside, np.maximum(flows, 0.0), 0.0)
        if gas is None or not of.real:
            witness = witness_of(self.reactions, inside.tobytes())
            if of.compressibility == 1.0 and witness is not None:
                remarks = witness.remarks(temperature, pressure, within, subject)
                self.notes.extend(note for note in remarks if note not in self.notes)
            return of.compressibility
        told = gas.remarks(temperature, pressure, within, taken_as_ideal=False, subject=subject)
        self.notes.extend(note for note in told if note not in self.notes)
        return float(gas.compressibility(temperature, pressure, within))

    def _note(self, note: Note) -> None:
        if note not in self.notes:
            self.notes.append(note)

    def _liquid_volume(self, side: str, streams: range) -> float | None:
        """Return the volumetric flow of a liquid where the readings tell it, m3/s (batch: m3)."""
        own = self.found.liquid_volume(streams)
        if own is None and side == "outlet":
            # A liquid of constant density leaves with the volume that it came in with.
            own = self.found.liquid_volume(self.found.account.inlet)
            if _told(own) is not None:
                self.assumed.append(CONSTANT_DENSITY)
        return _told(own)

    def _ratios(self, of: Uncertain) -> Json:
        said = self.results.yields
        names = self.reactions.names
        ratios: Json = {}
        for i, number_, factor in zip(
            said.products, self._each(of), said.factors.tolist(), strict=True
        ):
            if number_ is not None:
                number_["basis"] = said.basis
                if said.element is not None:
                    number_["element"] = said.element
                number_["factor"] = self.edge.number(factor, "dimensionless")
            ratios[names[i]] = number_
        return ratios

    def _space_time_yields(self, of: SpaceTimeYields) -> Json:
        names = self.reactions.names
        dimension = RATES[of.basis]
        found: Json = {}
        for i, said in zip(of.products, self._each(of.values, dimension), strict=True):
            if said is not None:
                said["basis"] = of.basis
            found[names[i]] = said
        return found

    def _closure(self, closures: Closures) -> Json:
        into, out = self._each(closures.into, self.flow), self._each(closures.out, self.flow)
        return {
            element: {"in": before, "out": after, "ratio": ratio}
            for element, before, after, ratio in zip(
                closures.elements, into, out, self._each(closures.ratio), strict=True
            )
        }

    def _without_suspect(self) -> Json:
        subjects = self.found.readings.subjects
        ways = [
            {
                "removed": [self.edge.place(subjects[k]).pointer for k in removed],
                "conversion": self._number(conversion),
                "chi_square": _plain(way.chi_square),
            }
            for way, (removed, conversion) in zip(
                self.found.without_suspects, self.results.without_suspects, strict=True
            )
        ]
        if self.results.overall is not None:
            for way, overall in zip(ways, self.results.overall.without_suspects, strict=True):
                way["overall_conversion"] = self._number(overall)
        first, *others = ways
        return {**first, "alternatives": others} if others else first


def write_reconciliation(edge: EdgeMap, found: Estimate) -> Json:
    """Return how well the readings of an account agree with each other."""
    checked = int(found.degrees_of_freedom) > 0
    table = found.readings
    pointers = [edge.place(subject).pointer for subject in table.subjects]
    sets: dict[int, list[str]] = {}
    for pointer, number_ in zip(pointers, table.suspect_set.tolist(), strict=True):
        if number_:
            sets.setdefault(number_, []).append(pointer)
    return {
        "degrees_of_freedom": int(found.degrees_of_freedom),
        "chi_square": _plain(found.chi_square),
        "limit": _plain(found.limit) if checked else None,
        "p_value": _plain(found.p_value) if checked else None,
        "consistent": not found.inconsistent if checked or found.inconsistent else None,
        "readings": [_reading(edge, table, k) for k in range(len(pointers))],
        "suspects": [sets[number_] for number_ in sorted(sets)],
    }


def _plain(value: Any) -> Json | None:
    plain = float(value)
    return {"value": plain, "unit": "1"} if np.isfinite(plain) else None


def _reading(edge: EdgeMap, table: ReadingTable, k: int) -> Json:
    place = edge.place(table.subjects[k])
    unit = place.unit or "1"

    def told(value: Any, u: Any = None) -> Json | None:
        if not np.isfinite(value):
            return None
        if u is None or not np.isfinite(u):
            return edge.number(float(value) * place.per, "dimensionless", unit)
        return edge.uncertain(
            float(value) * place.per, float(u) * place.per, "dimensionless", unit=unit
        )

    detectable = float(table.smallest_detectable_error[k])
    said: Json = {
        "reading": place.pointer,
        "measured": as_read(told(table.measured[k], table.u[k])),
        "reconciled": told(table.reconciled[k], table.reconciled_u[k]),
        "adjustment_over_u": _plain(table.adjustment_over_u[k]),
        "redundancy": _plain(table.redundancy[k]),
        "smallest_detectable_error": (
            edge.difference(detectable * place.per, unit) if np.isfinite(detectable) else None
        ),
        "suspect": bool(table.suspect_set[k]),
    }
    if np.isfinite(table.measurement_test[k]):
        said["measurement_test"] = _plain(table.measurement_test[k])
    if table.within_limit[k] >= 0:
        said["bound"] = "within-limit" if table.within_limit[k] else "beyond-limit"
    return said


def _told(value: FloatArray | None) -> float | None:
    """Return a number where there is one."""
    return None if value is None or not np.isfinite(value) else float(value)


def as_read(number_: Json | None) -> Json | None:
    """Return a reading as it was read, free of the last digit of its way to SI and back."""
    if number_ is None:
        return None
    return {k: float(f"{v:.14g}") if isinstance(v, float) else v for k, v in number_.items()}


TINY = 1e-9
"""Share of a stream's flows below which what is in its phase is rounding."""

NOTHING_IN_PHASE = Note(
    "nothing-in-phase",
    "the readings leave nothing in the phase of a stream, so it has no mole fractions and no"
    " concentrations",
    "warning",
)
NO_CONCENTRATIONS = Note(
    "concentrations-not-known",
    "a stream has concentrations where its volume is known: state temperature and pressure of a"
    " gas, volumetric flow, density or concentrations of a liquid",
)
NO_GAS = Note(
    "concentrations-not-known",
    "at its temperature and pressure the equation of state has a stream as a liquid only, so it has"
    " no volume as a gas: correct them, or declare the phase of what is condensed under 'species'",
    "warning",
)
DISTRIBUTION = Note(
    "distribution-not-told",
    "the readings do not tell how a substance is shared out among the streams that leave; such"
    " a stream has no total, and only the flows that are known",
    subject=("outlet",),
)
INCONSISTENT = Note(
    "readings-inconsistent",
    "the readings contradict each other beyond their uncertainties; 'suspects' names those in"
    " doubt, 'without_suspect' the answer without them",
    "warning",
    ("outlet",),
)
