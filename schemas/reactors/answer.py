"""What the reactor questions answer, on the wire."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
from marshmallow import fields

from core.arrays import FloatArray
from core.constants import NORMAL_MOLAR_VOLUME
from core.errors import Note
from core.reactors.cautions import cautions
from core.reactors.problem import ReactorProblem
from core.reactors.reacted import (
    Accumulation,
    EquilibriumBesides,
    HeatCurves,
    Hottest,
    KeyYields,
    Reacted,
    ReactorHeat,
    ReactorProfile,
    Sensitivity,
    StageReached,
    SteadyState,
    SteadyStates,
)
from core.streams.stream import Stream
from core.substances.property_data import PACKAGED
from schemas.answer import ATOMIC_WEIGHTS, Answer
from schemas.approach import ApproachSchema, write_approach
from schemas.conversion_answer import RatioSchema
from schemas.edge import EdgeMap, Json
from schemas.feed import StreamResultSchema, words_of, write_known_stream
from schemas.fields import Map, describe
from schemas.gas_model import gas_words, write_gas
from schemas.page import Page
from schemas.results import (
    NumberSchema,
    OpenSchema,
    TableSchema,
    number,
    numbers_by_name,
)
from schemas.table import Table, cells
from schemas.thermochemistry import write_sources


class EquilibriumSchema(OpenSchema):
    """The limit that equilibrium sets."""

    conversion = number("At the outlet's temperature.", required=True)


class AdiabaticEquilibriumSchema(OpenSchema):
    """Where the feed comes to equilibrium if no heat passes."""

    conversion = number("Of the key.", required=True)
    temperature = number(required=True)


class EquilibriumLimitSchema(OpenSchema):
    """Equilibrium, for reversible rates."""

    at_outlet_temperature = fields.Nested(EquilibriumSchema, required=True, allow_none=True)
    adiabatic = fields.Nested(
        AdiabaticEquilibriumSchema,
        allow_none=True,
        metadata=describe(
            "Of this feed, where the constant is known over temperature; null where heats are not."
        ),
    )
    approach = numbers_by_name(
        ApproachSchema, "By reaction, of the outlet; where the constant is known over temperature."
    )


class ReactorHeatSchema(OpenSchema):
    """The heat of the reactions, and what it would do if it were not removed."""

    duty = number("To be supplied (below zero: removed); of a batch an energy.", required=True)
    enthalpy_of_reaction = numbers_by_name(
        text="By reaction as written, at the feed's temperature.", required=True
    )
    adiabatic_rise = number(
        "What the conversion reached would bring without exchange of heat; not of a train."
    )
    adiabatic_rise_complete = number(
        "What complete conversion of the limiting reactant would bring; not of a train."
    )


class HottestSchema(OpenSchema):
    """The highest temperature, and where it is."""

    temperature = number(required=True)
    volume = number("From the inlet to there.")
    catalyst_mass = number("From the inlet to there.")
    time = number("Of a batch.")
    stage = fields.String(
        metadata=describe("Of a train: the stage, from whose inlet the place counts.")
    )


class SteadyStateSchema(OpenSchema):
    """A state that a stirred tank can rest in."""

    temperature = number("Null where the feed's is not stated.", required=True)
    conversion = number(required=True)
    stable = fields.Boolean(
        required=True,
        allow_none=True,
        metadata=describe("Null at the edge, where rounding would decide."),
    )
    described = fields.Boolean(
        required=True,
        metadata=describe("Whether it is the one that the rest of the answer describes."),
    )
    extents = numbers_by_name(text="By reaction.")
    outlet = fields.Nested(StreamResultSchema, required=True)


def complete(**kwargs: Any) -> fields.Boolean:
    """Return the field that says whether nothing was missed."""
    return fields.Boolean(
        metadata=describe(
            "Whether it is proven that there are no other steady states, or solutions; false says"
            " that they are those which a search found."
        ),
        **kwargs,
    )


class StageResultSchema(OpenSchema):
    """A stage of a train, or a tank of a series."""

    id = fields.String(required=True)
    kind = fields.String(required=True)
    conversion = number("Of the key, of all that was fed up to there.", required=True)
    volume = number()
    catalyst_mass = number()
    length = number("Of the bed.")
    duty = number("Supplied to it (below zero: removed).")
    outlet_rate = number("Rate of the key's consumption at its outlet.")
    outlet = fields.Nested(StreamResultSchema, required=True)
    removed = fields.Nested(StreamResultSchema, metadata=describe("What a separator takes out."))
    steady_states = fields.List(
        fields.Nested(SteadyStateSchema), metadata=describe("Of a stirred tank.")
    )
    complete = complete()
    profile = fields.Nested(TableSchema, metadata=describe("From the inlet of this stage."))


class AccumulationSchema(OpenSchema):
    """The most of a reactant that stands unreacted in a fed batch."""

    species = fields.String(required=True, metadata=describe("The reactant that is fed."))
    amount = number("The most that stands unreacted.", required=True)
    share = number("Of all of it that is fed in the end.", required=True)
    time = number("When.", required=True)
    temperature_if_cooling_stops = number(
        "What the batch comes to if cooling and feed stop at the worst time: a screening value."
        " Null where heats are not known.",
        required=True,
    )


class SensitivitySchema(OpenSchema):
    """What a small change of something stated does, to first order."""

    pointer = fields.String(required=True, metadata=describe("What is changed in the request."))
    change = number("1 K of a temperature; 0.01 of itself of all else.", required=True)
    effects = Map(
        fields.Nested(NumberSchema),
        at_least=0,
        required=True,
        metadata=describe("By member of the answer: the change of it."),
    )


class ReactorResult(OpenSchema):
    """A reactor at work: its size, what comes out of it, its heat."""

    gas_model = fields.String(metadata=describe("Where the feed is a gas."))
    volume = number("Of the reactor, all tanks or tubes together; of a batch, at the start.")
    catalyst_mass = number("In the reactor.")
    length = number("Of a bed whose cross section is stated.")
    time = number("Of a batch.")
    conversion = number("Of the key.", required=True)
    extents = numbers_by_name(text="By reaction; null where dependent reactions leave them open.")
    yields = numbers_by_name(
        RatioSchema,
        "By product of several reactions, per key fed; null, with a note, where the reactions that"
        " make it do not all consume the key at one ratio.",
    )
    selectivities = numbers_by_name(RatioSchema, "By product, per key converted.")
    largest_conversion = number(
        "Of the key on this way: at equilibrium, or where a substance is used up."
    )
    bounded_by = fields.String(
        metadata=describe(
            "What sets largest_conversion.", enum=["equilibrium", "limiting-reactant"]
        ),
    )
    limiting = fields.String(metadata=describe("The substance that would be used up."))
    space_time = number("Volume over volumetric flow at inlet conditions.")
    catalyst_mass_per_key_flow = number("Catalyst over the molar flow of the key fed, W/F_A0.")
    space_velocities = Map(
        fields.Nested(NumberSchema),
        at_least=0,
        metadata=describe(
            "Hourly: gas (inlet at 273.15 K and 101.325 kPa per volume), liquid (inlet volume per"
            " volume), mass (of the inlet, per mass of catalyst)."
        ),
    )
    mean_residence_time = number(
        "Integral of dV/v, of a bed its whole volume; of a tank V/v at its outlet; of a reactor"
        " with recycle that of one pass."
    )
    outlet_rate = number("Rate of the key's consumption at the outlet.")
    pressure_drop = number("Along a bed, where it is counted.")
    hottest = fields.Nested(
        HottestSchema, metadata=describe("Where the temperature is not one throughout.")
    )
    utility_outlet_temperature = number("Of a utility whose temperature changes.")
    inlet = fields.Nested(StreamResultSchema, required=True)
    outlet = fields.Nested(StreamResultSchema, required=True)
    equilibrium = fields.Nested(EquilibriumLimitSchema)
    heat = fields.Nested(
        ReactorHeatSchema,
        required=True,
        allow_none=True,
        metadata=describe("Null where the heat of a reaction is not known; a note says why."),
    )
    steady_states = fields.List(
        fields.Nested(SteadyStateSchema),
        metadata=describe(
            "Of a stirred tank, in rising order; the outlet of the answer is that of one of them."
        ),
    )
    complete = complete()
    heat_curves = fields.Nested(
        TableSchema,
        metadata=describe(
            "Of a stirred tank: over temperature, the heat that its reactions give off there and"
            " that which leaves with the stream and to the utility; steady states are where they"
            " cross."
        ),
    )
    tank_conversions = fields.List(
        fields.Nested(NumberSchema), metadata=describe("Of tanks in series, in order.")
    )
    stages = fields.List(
        fields.Nested(StageResultSchema), metadata=describe("Of a train, in order of flow.")
    )
    accumulation = fields.Nested(AccumulationSchema, metadata=describe("Of a fed batch."))
    profile = fields.Nested(
        TableSchema,
        metadata=describe(
            "Along the reactor, or over a batch. Columns, where they are known: volume, time,"
            " catalyst_mass, length, conversion, temperature, pressure, utility_temperature,"
            " volumetric_flow, rate (of the key's consumption); extent and rate by reaction; flow"
            " (of a batch amount) and mole fraction by substance."
        ),
    )
    sensitivities = fields.List(
        fields.Nested(SensitivitySchema), metadata=describe("Where they are asked for.")
    )


SCREENING = Note(
    "screening-calculation",
    "a screening calculation for ideal reactors: no relief, runaway or flammability assessment."
    " Follow local codes and licensed practice.",
    "caution",
)

Numbers = tuple[tuple[str, str, str], ...]


class ReactorWriter:
    """Writes reactors at work in the words and units of one request.

    Parameters
    ----------
    problem : ReactorProblem
    gas_model : str
    edge : EdgeMap
    """

    def __init__(self, problem: ReactorProblem, gas_model: str, edge: EdgeMap) -> None:
        self.problem, self.gas_model, self.edge = problem, gas_model, edge
        self.names = problem.reactions.names
        self.ids = [reaction.id for reaction in problem.reactions.reactions]
        self.batch = problem.feed.batch
        self.words = words_of(self.batch)

    def maybe(self, value: float | None, dimension: str) -> Json | None:
        """Return a number, or None for one that is not known."""
        if value is None or not np.isfinite(value):
            return None
        return self.edge.number(float(value), dimension)

    def result(self, reacted: Reacted) -> Json:
        """Return the result that tells of a reactor at work."""
        told: Json = {"gas_model": self.gas_model} if self.problem.feed.phase == "gas" else {}
        self._sizes(told, reacted)
        told["conversion"] = self.edge.number(reacted.conversion, "dimensionless")
        told["extents"] = self._extents(reacted.extents)
        if reacted.yields is not None:
            told["yields"] = self._ratios(reacted.yields, reacted.yields.yields)
            told["selectivities"] = self._ratios(reacted.yields, reacted.yields.selectivities)
        limit = reacted.limit
        if limit is not None:
            told["largest_conversion"] = self.edge.number(limit.conversion, "dimensionless")
            told["bounded_by"] = limit.bounded_by
            if limit.limiting is not None:
                told["limiting"] = self.names[limit.limiting]
        self._times(told, reacted)
        rate = "reaction_rate_per_mass" if reacted.by_catalyst_mass else "reaction_rate"
        self._put(told, "outlet_rate", reacted.key_rate, rate)
        drop = self._pressure_drop(reacted)
        self._put(told, "pressure_drop", drop, "pressure_difference")
        if reacted.hottest is not None:
            told["hottest"] = self._hottest(reacted.hottest)
        self._put(
            told, "utility_outlet_temperature", reacted.utility_outlet_temperature, "temperature"
        )
        told["inlet"] = self.stream(reacted.inlet)
        told["outlet"] = self.stream(reacted.outlet)
        if reacted.equilibrium is not None:
            told["equilibrium"] = self._equilibrium(reacted.equilibrium)
        told["heat"] = None if reacted.heat is None else self._heat(reacted.heat)
        if reacted.steady_states is not None:
            self._steady_states(told, reacted.steady_states)
            if reacted.steady_states.curves is not None:
                told["heat_curves"] = self.heat_curves(reacted.steady_states.curves).document()
        self._stages(told, reacted.stages)
        if reacted.accumulation is not None:
            told["accumulation"] = self._accumulation(reacted.accumulation)
        if reacted.profile is not None:
            told["profile"] = self.profile(reacted.profile).document()
        if reacted.sensitivities:
            told["sensitivities"] = [self._sensitivity(one) for one in reacted.sensitivities]
        return told

    def answer(self, reacted: Reacted, page: Callable[[Json], Page]) -> Answer:
        """Return the answer about one reactor at work; ``page`` makes its page of the result."""
        result, sources = self.result(reacted), self.sources([reacted])
        return Answer(
            result=result,
            notes=self.edge.notes(self.notes(reacted)),
            assumed=self.edge.notes((*self.edge.read_assumed, *reacted.assumed)),
            method=self.method(reacted),
            data=self.data(sources),
            properties=sources,
            table=lambda: self.table(reacted),
            page=lambda: page(result),
        )

    def stream(self, stream: Stream) -> Json:
        """Return a stream as it stands in the answer."""
        return write_known_stream(self.edge, self.names, stream)

    def _put(self, told: Json, name: str, value: float | None, dimension: str) -> None:
        if value is not None:
            told[name] = self.maybe(value, dimension)

    def _sizes(self, told: Json, of: Reacted | StageReached) -> None:
        self._put(told, "volume", of.volume, "volume")
        self._put(told, "catalyst_mass", of.catalyst_mass, "mass")
        self._put(told, "length", of.length, "length")
        if isinstance(of, Reacted):
            self._put(told, "time", of.time, "time")

    def _extents(self, extents: FloatArray | None) -> Json:
        if extents is None:
            return dict.fromkeys(self.ids)
        dimension = self.words.flow_dimension
        each = zip(self.ids, extents.tolist(), strict=True)
        return {id_: self.edge.number(x + 0.0, dimension) for id_, x in each}

    def _ratios(self, of: KeyYields, values: FloatArray) -> Json:
        told: Json = {}
        each = zip(of.products, values.tolist(), of.factors.tolist(), strict=True)
        for i, value, factor in each:
            ratio = self.maybe(value, "dimensionless")
            if ratio is not None:
                ratio |= {"basis": "key", "factor": self.edge.number(factor, "dimensionless")}
            told[self.names[i]] = ratio
        return told

    def _times(self, told: Json, reacted: Reacted) -> None:
        self._put(told, "space_time", reacted.space_time, "time")
        feed, mass = reacted.inlet, reacted.catalyst_mass
        if self.batch:
            return
        if mass is not None:
            per = mass / float(feed.flows[self.problem.key])
            told["catalyst_mass_per_key_flow"] = self.edge.number(per, "mass_per_molar_flow")
        velocities = self._space_velocities(feed, reacted.volume, mass)
        if velocities:
            told["space_velocities"] = velocities
        self._put(told, "mean_residence_time", reacted.mean_residence_time, "time")

    def _space_velocities(self, feed: Stream, volume: float | None, mass: float | None) -> Json:
        """Return hourly space velocities, each on its stated basis."""
        told: Json = {}
        if volume:
            flow = feed.volumetric_flow
            if feed.phase == "gas":
                normal = float(feed.phase_total) * NORMAL_MOLAR_VOLUME
                told["gas"] = self.edge.number(normal / volume, "frequency")
            elif flow is not None:
                told["liquid"] = self.edge.number(float(flow) / volume, "frequency")
        if mass and not feed.solvent_unknown:
            fed = float(feed.flows @ self.problem.reactions.molar_masses)
            told["mass"] = self.edge.number(fed / mass, "frequency")
        return told

    def _pressure_drop(self, reacted: Reacted) -> float | None:
        if not getattr(self.problem.reactor, "pressure_drop", False):
            return None
        into, out = reacted.inlet.pressure, reacted.outlet.pressure
        return None if into is None or out is None else float(into) - float(out)

    def _hottest(self, hottest: Hottest) -> Json:
        told: Json = {"temperature": self.edge.number(hottest.temperature, "temperature")}
        at = hottest.at
        if at is not None:
            member = "catalyst_mass" if at.dimension == "mass" else at.dimension
            told[member] = self.edge.number(at.value, at.dimension)
        if hottest.stage is not None:
            told["stage"] = hottest.stage
        return told

    def _equilibrium(self, found: EquilibriumBesides) -> Json:
        conversion = self.maybe(found.conversion, "dimensionless")
        told: Json = {
            "at_outlet_temperature": None if conversion is None else {"conversion": conversion}
        }
        if found.over_temperature:
            adiabatic = found.adiabatic
            told["adiabatic"] = adiabatic and {
                "conversion": self.edge.number(adiabatic.conversion, "dimensionless"),
                "temperature": self.edge.number(adiabatic.temperature, "temperature"),
            }
            told["approach"] = {
                self.ids[j]: write_approach(one, lambda x, _, name: self.edge.number(x, name))
                for j, one in found.approaches.items()
            }
        return told

    def _heat(self, heat: ReactorHeat) -> Json:
        each = zip(self.ids, heat.enthalpies.tolist(), strict=True)
        told: Json = {
            "duty": self.maybe(heat.duty, "energy" if self.batch else "power"),
            "enthalpy_of_reaction": {id_: self.maybe(h, "molar_energy") for id_, h in each},
        }
        if self.problem.reactor.kind != "train":
            for name in ("adiabatic_rise", "adiabatic_rise_complete"):
                told[name] = self.maybe(getattr(heat, name), "temperature_difference")
        return told

    def _steady_states(self, told: Json, found: SteadyStates) -> None:
        told["steady_states"] = [
            self._steady_state(state, described=k == found.described)
            for k, state in enumerate(found.states)
        ]
        told["complete"] = found.complete

    def _steady_state(self, state: SteadyState, *, described: bool) -> Json:
        t = state.outlet.temperature
        told: Json = {
            "temperature": None if t is None else self.edge.number(float(t), "temperature"),
            "conversion": self.edge.number(state.conversion, "dimensionless"),
            "stable": state.stable,
            "described": described,
        }
        if state.extents is not None:
            told["extents"] = self._extents(state.extents)
        told["outlet"] = self.stream(state.outlet)
        return told

    def heat_curves(self, curves: HeatCurves) -> Table:
        """Return heat given off and heat removed, over temperature."""
        t, power = self.edge.scales["temperature"], self.edge.scales["power"]
        return Table(
            {
                "temperature": cells((curves.temperature - t.offset) / t.factor),
                "heat_generated": cells(curves.generated / power.factor),
                "heat_removed": cells(curves.removed / power.factor),
            },
            {"temperature": t.unit, "heat_generated": power.unit, "heat_removed": power.unit},
        )

    def _stages(self, told: Json, stages: Sequence[StageReached]) -> None:
        if not stages:
            return
        if self.problem.reactor.kind == "tanks-in-series":
            told["tank_conversions"] = [
                self.edge.number(stage.conversion, "dimensionless") for stage in stages
            ]
            return
        told["stages"] = [self._stage(stage) for stage in stages]

    def _stage(self, stage: StageReached) -> Json:
        told: Json = {"id": stage.id, "kind": stage.kind}
        told["conversion"] = self.edge.number(stage.conversion, "dimensionless")
        self._sizes(told, stage)
        self._put(told, "duty", stage.duty, "power")
        rate = "reaction_rate_per_mass" if stage.by_catalyst_mass else "reaction_rate"
        self._put(told, "outlet_rate", stage.rate, rate)
        told["outlet"] = self.stream(stage.outlet)
        if stage.removed is not None and stage.removed.phase_total > 0:
            told["removed"] = self.stream(stage.removed)
        if stage.steady_states is not None:
            self._steady_states(told, stage.steady_states)
        if stage.profile is not None:
            told["profile"] = self.profile(stage.profile).document()
        return told

    def _accumulation(self, most: Accumulation) -> Json:
        return {
            "species": self.names[most.substance],
            "amount": self.edge.number(most.amount, "amount"),
            "share": self.edge.number(most.share, "dimensionless"),
            "time": self.edge.number(most.time, "time"),
            "temperature_if_cooling_stops": self.maybe(
                most.temperature_if_cooling_stops, "temperature"
            ),
        }

    def _sensitivity(self, found: Sensitivity) -> Json:
        return {
            "pointer": self.edge.place(found.subject).pointer,
            "change": self.edge.number(found.change.value, found.change.dimension),
            "effects": {
                name: self.edge.number(effect.value, effect.dimension)
                for name, effect in found.effects.items()
            },
        }

    def profile(self, way: ReactorProfile) -> Table:
        """Return the way through a reactor, a row for each place."""
        return _ProfileTable(self, way).table()

    def table(self, reacted: Reacted) -> Table:
        """Return the profile, or of a train those of its stages, or else the composition."""
        if reacted.profile is not None:
            return self.profile(reacted.profile)
        parts = [
            (stage.id, self.profile(stage.profile)) for stage in reacted.stages if stage.profile
        ]
        return _stacked("stage", parts) if parts else self.composition(reacted)

    def composition(self, reacted: Reacted) -> Table:
        """Return what goes in and comes out, a row for each substance."""
        flow = self.edge.scales[self.words.flow_dimension]
        columns: dict[str, list[Any]] = {"substance": list(self.names)}
        units: dict[str, str] = {}
        into, out_of = ("charged", "at the end") if self.batch else ("inlet flow", "outlet flow")
        for name, stream in ((into, reacted.inlet), (out_of, reacted.outlet)):
            columns[name] = cells(stream.flows / flow.factor)
            units[name] = flow.unit
        out = reacted.outlet
        if not out.solvent_unknown:
            inside = np.where(out.in_phase, out.flows, np.nan)
            columns["mole fraction"] = cells(inside / float(out.phase_total))
        return Table(columns, units)

    def notes(self, reacted: Reacted) -> tuple[Note, ...]:
        """Return what is told of a reactor at work, its cautions last but one."""
        return (
            *self.edge.read_notes,
            *reacted.notes,
            *cautions(self.problem, reacted),
            SCREENING,
        )

    def sources(self, reacted: Sequence[Reacted]) -> Json | None:
        """Return where the properties that were used come from; None without any."""
        used = {p.substance: p for one in reacted for p in one.properties}
        gas = self.problem.gas
        if not used and gas is None:
            return None
        told = write_sources(self.edge, used.values())
        return told if gas is None else write_gas(self.edge, gas, told)

    def data(self, sources: Json | None) -> str:
        """Return where packaged data come from."""
        return ATOMIC_WEIGHTS if sources is None else f"{ATOMIC_WEIGHTS}; {PACKAGED}"

    def method(self, reacted: Reacted) -> str:
        """Return how it was computed."""
        return reacted.method + gas_words(self.problem.gas)


class _ProfileTable:
    def __init__(self, writer: ReactorWriter, way: ReactorProfile) -> None:
        self.writer, self.way, self.scales = writer, way, writer.edge.scales
        self.columns: dict[str, list[Any]] = {}
        self.units: dict[str, str] = {}

    def add(self, name: str, values: FloatArray | None, dimension: str) -> None:
        if values is None:
            return
        scale = self.scales[dimension]
        self.columns[name] = cells((values - scale.offset) / scale.factor)
        self.units[name] = scale.unit

    def table(self) -> Table:
        way, writer = self.way, self.writer
        self.add("time", way.time, "time")
        self.add("volume", way.volume, "volume")
        self.add("catalyst_mass", way.catalyst_mass, "mass")
        self.add("length", way.length, "length")
        self.add("conversion", way.conversion, "dimensionless")
        self.add("temperature", way.temperature, "temperature")
        self.add("pressure", way.pressure, "pressure")
        self.add("utility_temperature", way.utility_temperature, "temperature")
        words = writer.words
        self.add(words.volume, way.volumetric_flow, words.volume_dimension)
        rate = "reaction_rate_per_mass" if way.by_catalyst_mass else "reaction_rate"
        self.add("rate", way.key_rate, rate)
        self._by_reaction("extent", way.extents, words.flow_dimension)
        self._by_reaction("rate", way.rates, rate)
        self._by_substance(way.flows)
        return Table(self.columns, self.units)

    def _by_reaction(self, what: str, values: FloatArray | None, dimension: str) -> None:
        if values is not None:
            for j, id_ in enumerate(self.writer.ids):
                self.add(f"{what} {id_}", values[:, j], dimension)

    def _by_substance(self, flows: FloatArray | None) -> None:
        if flows is None:
            return
        writer, feed = self.writer, self.writer.problem.feed
        for i, name in enumerate(writer.names):
            self.add(f"{writer.words.flow} {name}", flows[:, i], writer.words.flow_dimension)
        if feed.solvent_unknown:
            return
        total = flows[:, feed.in_phase].sum(axis=1)
        for i, name in enumerate(writer.names):
            if feed.in_phase[i]:
                self.add(f"mole fraction {name}", flows[:, i] / total, "dimensionless")


def _stacked(name: str, parts: Sequence[tuple[str, Table]]) -> Table:
    """Return tables one below the other, each row with the name of its own.

    A column that has another unit in one of them, as a rate by catalyst mass beside one by
    volume, stands apart there.
    """
    units: dict[str, str] = {}
    apart: list[tuple[str, int, dict[str, list[Any]]]] = []
    for label, table in parts:
        columns: dict[str, list[Any]] = {}
        for column, inside in table.columns.items():
            unit = table.units[column]
            own = column if units.setdefault(column, unit) == unit else f"{column} (other basis)"
            units[own], columns[own] = unit, inside
        apart.append((label, len(next(iter(columns.values()))), columns))
    told: dict[str, list[Any]] = {name: [], **{column: [] for column in units}}
    for label, rows, columns in apart:
        told[name] += [label] * rows
        for column in units:
            told[column] += columns.get(column, [None] * rows)
    return Table(told, units)
