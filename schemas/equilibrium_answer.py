"""The answer to an equilibrium request: the composition, as numbers, a table and a page."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
from marshmallow import fields

from core.arrays import FloatArray
from core.constants import GAS_CONSTANT
from core.equilibrium.feed_at_equilibrium import (
    FeedReached,
    constant_subject,
    told_once,
)
from core.equilibrium.outlet import MeasuredOutlet, ReactionApproach
from core.errors import Amount, Note, Subject
from core.mole_account.stoichiometric_table import CONSTANT_DENSITY
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.estimate import Estimate
from core.rates.constants import Constant
from core.rates.equilibrium_constant import (
    STANDARD_PRESSURE,
    LnCorrelation,
    VantHoff,
    coefficient_sum,
    expected_unit_parts,
)
from core.substances.property_data import PACKAGED, StandardProperties
from core.thermochemistry.reaction_properties import ReactionProperties
from schemas.answer import ATOMIC_WEIGHTS, Answer
from schemas.approach import LARGEST_EXPONENT, ApproachSchema, write_approach
from schemas.conversion_answer import ReconciliationSchema, as_read, write_reconciliation
from schemas.edge import EdgeMap, Json
from schemas.equilibrium import EquilibriumQuestion
from schemas.feed import StreamResultSchema, words_of, write_stream
from schemas.fields import Map, describe
from schemas.gas_model import gas_words, write_gas
from schemas.page import Curve, Page, Plot, course, told
from schemas.results import OpenSchema, TableSchema, envelope, number, numbers_by_name
from schemas.table import Table, cells
from schemas.thermochemistry import write_sources
from schemas.units import find_unit, spell


class EquilibriumConstantResultSchema(OpenSchema):
    """The constant of one reaction at the temperature of equilibrium, and where it is from."""

    value = fields.Float(
        required=True,
        allow_none=True,
        metadata=describe("Null where it is beyond what a number of a computer holds."),
    )
    unit = fields.String(required=True)
    natural_logarithm = number("Of the thermodynamic constant.", required=True)
    from_ = fields.String(
        data_key="from",
        required=True,
        metadata=describe("", enum=["stated", "van-t-hoff", "correlation", "thermochemistry"]),
    )
    standard_pressure = number("Of gases, where it counts.")
    enthalpy_of_reaction = number("At that temperature, per mole of reaction as written.")


class EquilibriumHeatSchema(OpenSchema):
    """The heat of going from the feed to equilibrium."""

    duty = number(
        "To be supplied to hold the temperature (below zero: removed); of a batch that holds its"
        " volume the change of internal energy. Per mole of key, where no reading tells how much"
        " flows."
    )
    adiabatic_rise = number("Of the temperature, where no heat passes.")


class MeasuredOutletSchema(OpenSchema):
    """What the readings of feed and outlet together say of the outlet that was measured.

    /v1/conversion answers the same streams in full: yields, closures, and the
    account without a suspect reading.
    """

    conversion = number("Of the key, as measured.", required=True)
    outlet = fields.Nested(
        StreamResultSchema, metadata=describe("Reconciled; absent where not all of it is told.")
    )
    reconciliation = fields.Nested(ReconciliationSchema, required=True)


class EquilibriumResult(OpenSchema):
    """The composition at equilibrium, and what it is compared with."""

    key = fields.String(required=True)
    hold = fields.String(required=True)
    gas_model = fields.String(required=True)
    temperature = number(required=True)
    pressure = number("Null for a liquid whose pressure is not stated.", required=True)
    conversion = number("Of the key.", required=True)
    largest_conversion = number("Of the key, by what is fed.", required=True)
    smallest_conversion = number("Of the key, by what is fed.", required=True)
    limiting = fields.String(required=True, allow_none=True)
    extents = numbers_by_name(text="By reaction; null where dependent reactions leave them open.")
    inlet = fields.Nested(StreamResultSchema, required=True)
    outlet = fields.Nested(StreamResultSchema, required=True)
    equilibrium_constants = numbers_by_name(
        EquilibriumConstantResultSchema, "By reaction.", required=True
    )
    fugacity_coefficients = numbers_by_name(
        text="By substance of a real gas; null where beyond what a number of a computer holds."
    )
    condensed = Map(
        fields.Boolean(),
        at_least=0,
        metadata=describe("Whether any is left or formed of a pure condensed substance."),
    )
    heat = fields.Nested(
        EquilibriumHeatSchema,
        allow_none=True,
        metadata=describe("Null where enthalpies are not known."),
    )
    approach = numbers_by_name(
        ApproachSchema,
        "By reaction, of the measured outlet; u is of its readings, K is taken as exact.",
    )
    measured = fields.Nested(
        MeasuredOutletSchema, metadata=describe("Of a measured outlet: its account.")
    )
    sweep = fields.Nested(
        TableSchema,
        metadata=describe(
            "A row for each point; null where there is no answer. Columns: temperature, pressure,"
            " conversion, extent and mole fraction (or flow) by name, compressibility of a real"
            " gas, and the duty where the temperature is held."
        ),
    )


EquilibriumAnswer = envelope("EquilibriumAnswer", EquilibriumResult)


HEATS = {"duty": "heat supplied (below zero: removed)", "adiabatic_rise": "adiabatic rise"}
"""How a page calls them."""

FORMS: dict[type, str] = {
    Constant: "stated",
    VantHoff: "van-t-hoff",
    LnCorrelation: "correlation",
    ReactionProperties: "thermochemistry",
}
"""How a constant was found, by its form."""

Approaches = tuple[tuple[ReactionApproach | None, ...], tuple[Note, ...]]

METHOD = (
    "equilibrium of the reactions stated, by Newton's method in the logarithms of the minor"
    " substances"
)


_SAME_TEMPERATURE = 1.0
"""K within which the outlet measured is at the temperature held."""

SCREENING = Note(
    "screening-calculation",
    "equilibrium of the stated reactions alone, which says nothing of how fast or how safely it is"
    " reached: no relief, runaway or flammability assessment. Follow local codes and licensed"
    " practice",
    "caution",
)


def write(
    question: EquilibriumQuestion,
    reached: FeedReached,
    approach: Approaches | None,
    edge: EdgeMap,
) -> Answer:
    """Return the answer that holds an equilibrium."""
    return _Writer(question, reached, approach, edge).answer()


class _Writer:
    def __init__(
        self,
        question: EquilibriumQuestion,
        reached: FeedReached,
        approach: Approaches | None,
        edge: EdgeMap,
    ) -> None:
        self.question, self.reached, self.approach, self.edge = question, reached, approach, edge
        self.problem, self.states = question.problem, reached.states
        self.reactions, self.feed = self.problem.reactions, self.problem.feed
        self.names = self.reactions.names
        self.ids = [reaction.id for reaction in self.reactions.reactions]
        self.words = words_of(self.feed.batch)
        self.temperature = float(self.states.temperature[0])
        self.measured = question.account

    def answer(self) -> Answer:
        problem, states, edge = self.problem, self.states, self.edge
        reach, own = self.reached.range, self.feed.volumetric_flow
        result: Json = {
            "key": self.names[problem.key],
            "hold": problem.hold,
            "gas_model": self.question.gas_model,
            "temperature": as_read(edge.number(self.temperature, "temperature")),
            "pressure": as_read(self._number(states.pressure[0], "pressure")),
            "conversion": edge.number(float(self.reached.conversion[0]), "dimensionless"),
            "largest_conversion": edge.number(reach.largest, "dimensionless"),
            "smallest_conversion": edge.number(reach.smallest + 0.0, "dimensionless"),
            "limiting": None if reach.limiting is None else self.names[reach.limiting],
            "extents": self._extents(),
            "inlet": self._stream(
                self.feed.flows,
                self.feed.temperature,
                self.feed.pressure,
                self.feed.compressibility,
                None if own is None else float(own),
                self.reached.heat_capacities[0],
            ),
            "outlet": self._stream(
                states.amounts[0],
                self.temperature,
                _finite(states.pressure[0]),
                float(states.compressibility[0]),
                _finite(states.volume[0]),
                self.reached.heat_capacities[1],
            ),
            "equilibrium_constants": self._constants(),
        }
        if self.problem.gas is not None:
            inside = np.flatnonzero(self.feed.in_phase).tolist()
            each = states.ln_fugacity_coefficients[0].tolist()
            result["fugacity_coefficients"] = {
                self.names[i]: self._number(_power(each[i]), "dimensionless") for i in inside
            }
        pure = np.flatnonzero(~self.feed.in_phase).tolist()
        if pure:
            result["condensed"] = {self.names[i]: bool(states.amounts[0, i] > 0) for i in pure}
        result["heat"] = self._heat()
        if self.approach is not None:
            result["approach"] = self._approach()
        if self.measured is not None:
            result["measured"] = self._measured(self.measured)
        if problem.values is not None:
            result["sweep"] = self._sweep().document()
        assumed = [
            note
            for j, constant in enumerate(problem.constants)
            for note in constant.assumed(self.temperature, constant_subject(self.reactions, j))
        ]
        if self.feed.phase == "liquid":
            assumed.append(CONSTANT_DENSITY)
        sources = self._sources()
        told = () if self.approach is None else self.approach[1]
        notes = (
            *edge.read_notes,
            *self._elsewhere(),
            *told_once((*self.reached.notes, *told)),
            SCREENING,
        )
        return Answer(
            result=result,
            notes=edge.notes(notes),
            assumed=edge.notes((*edge.read_assumed, *assumed)),
            method=METHOD + self._gas_words(),
            data=f"{ATOMIC_WEIGHTS}; {PACKAGED}" if sources else ATOMIC_WEIGHTS,
            properties=sources or None,
            table=self._table,
            page=self._page,
        )

    def _number(self, value: float, dimension: str) -> Json | None:
        known = _finite(value)
        return None if known is None else self.edge.number(known, dimension)

    def _absolute(self, pressure: float) -> Json:
        """Return a pressure that is no reading: never in a gauge unit."""
        scale = self.edge.scales["pressure"]
        if scale.offset:
            return {"value": pressure / STANDARD_PRESSURE, "unit": "bar"}
        return self.edge.number(pressure, "pressure")

    def _stream(
        self,
        flows: FloatArray,
        temperature: float | None,
        pressure: float | None,
        z: float,
        volume: float | None,
        heat_capacity: float,
    ) -> Json:
        there = bool(flows[self.feed.in_phase].any())
        stream = write_stream(
            self.edge,
            self.names,
            flows,
            self.feed.in_phase,
            batch=self.feed.batch,
            volume=volume if there and self._volume_known() else None,
            temperature=temperature,
            pressure=pressure,
            compressibility=z,
            fractions=there and not self.feed.solvent_unknown,
        )
        for name in ("temperature", "pressure"):
            if name in stream:
                stream[name] = as_read(stream[name])
        if np.isfinite(heat_capacity):
            name = "heat_capacity" if self.feed.batch else "heat_capacity_flow"
            dimension = "molar_heat_capacity" if self.question.per_mole_of_key else name
            stream[name] = self.edge.number(heat_capacity, dimension)
        return stream

    def _volume_known(self) -> bool:
        return self.feed.phase == "gas" or self.feed.volumetric_flow is not None

    def _extents(self) -> Json:
        reactions = self.reactions
        if reactions.rank < len(reactions.reactions):
            return dict.fromkeys(self.ids)
        each = self.states.extents[0].tolist()
        dimension = self.words.flow_dimension
        return {id_: self.edge.number(x, dimension) for id_, x in zip(self.ids, each, strict=True)}

    def _constants(self) -> Json:
        stated = self.problem.stated_constants
        t = np.array([self.temperature])
        told: Json = {}
        for j, (id_, constant) in enumerate(zip(self.ids, self.problem.constants, strict=True)):
            form, subject = constant.constant, constant_subject(self.reactions, j)
            total = coefficient_sum(self.reactions.nu[j], self.feed.in_phase)
            unit = self._stated_unit(subject) or spell(expected_unit_parts(constant.kind, total))
            ln = float(np.broadcast_to(form.ln_at(t, subject), t.shape)[0])
            ln_value = ln - math.log(find_unit(unit).factor)
            told[id_] = {
                "value": _finite(_power(ln_value)),
                "unit": unit,
                "natural_logarithm": self.edge.number(
                    float(stated.one_ln_k(j, t)[0]), "dimensionless"
                ),
                "from": FORMS[type(form)],
            }
            if self.feed.phase == "gas" and constant.kind == "thermodynamic" and total:
                told[id_]["standard_pressure"] = self._absolute(constant.standard_pressure)
            heat = constant.enthalpy(self.temperature)
            if heat is not None:
                told[id_]["enthalpy_of_reaction"] = self.edge.number(heat, "molar_energy")
        return told

    def _stated_unit(self, subject: Subject) -> str | None:
        """Return the unit in which a constant was stated, if it was."""
        for where in ((*subject, "constant"), (*subject, "unit"), subject):
            place = self.edge.places.get(where)
            if place is not None and place[1] is not None:
                return place[1]
        return None

    @property
    def _heat_dimension(self) -> str:
        if self.question.per_mole_of_key:
            return "molar_energy"
        return "energy" if self.feed.batch else "power"

    def _heat(self) -> Json | None:
        heat = self.reached.heat
        if heat is None:
            return None
        told: Json = {}
        if self.problem.hold.startswith("temperature"):
            told["duty"] = self._number(heat[0], self._heat_dimension)
        elif self.feed.temperature is not None:
            told["adiabatic_rise"] = self.edge.number(
                self.temperature - self.feed.temperature, "temperature_difference"
            )
        return told

    def _elsewhere(self) -> Iterator[Note]:
        """Say that the equilibrium is not at the temperature of the outlet measured."""
        outlet, problem = self.question.outlet, self.problem
        held = problem.hold.startswith("temperature") and problem.temperature is None
        if outlet is None or not held:
            return
        if abs(self.temperature - outlet.temperature.value) > _SAME_TEMPERATURE:
            yield Note(
                "equilibrium-not-at-outlet",
                "the conversion, composition and heat are those of equilibrium at the feed's"
                " {temperature}, and the outlet was measured at {measured}; state this under 'at'"
                " to have them there. The approach is that of the outlet all the same",
                "warning",
                outlet.temperature.subject,
                {
                    "temperature": Amount(self.temperature, "temperature"),
                    "measured": Amount(outlet.temperature.value, "temperature"),
                },
            )

    def _approach(self) -> Json:
        assert self.approach is not None
        each = zip(self.ids, self.approach[0], strict=True)
        return {id_: write_approach(found, self.edge.uncertain) for id_, found in each}

    def _measured(self, found: Estimate) -> Json:
        of = conversion_results(found, closures=False).conversion
        value = float(of.value)
        said: Json = {
            "conversion": self.edge.uncertain(value, float(of.u), "dimensionless")
            if np.isfinite(value)
            else None
        }
        outlet = self.question.outlet
        assert outlet is not None
        if np.isfinite(outlet.flows).all():
            forms = np.concatenate([outlet.forms, outlet.forms.sum(axis=0)[None]])
            u = found.u_of(forms)
            pressure = None if outlet.pressure is None else outlet.pressure.value
            said["outlet"] = write_stream(
                self.edge,
                self.names,
                outlet.flows,
                self.feed.in_phase,
                batch=self.feed.batch,
                volume=self._volume_of(outlet),
                temperature=outlet.temperature.value,
                pressure=pressure,
                compressibility=outlet.compressibility,
                fractions=not self.feed.solvent_unknown,
                u=u[:-1],
                total_u=float(u[-1]),
            )
        said["reconciliation"] = write_reconciliation(self.edge, found)
        return said

    def _volume_of(self, outlet: MeasuredOutlet) -> float | None:
        """Return the volumetric flow of the outlet measured, m3/s (batch: m3), where known."""
        if self.feed.phase == "liquid":
            return outlet.volume
        if outlet.pressure is None:
            return None
        moles = float(outlet.flows[self.feed.in_phase].sum()) * outlet.compressibility
        return moles * GAS_CONSTANT * outlet.temperature.value / outlet.pressure.value

    def _sources(self) -> Json:
        used: dict[str, StandardProperties] = {}
        for constant in self.problem.constants:
            if isinstance(constant.constant, ReactionProperties):
                used |= {p.substance: p for p in constant.constant.properties}
        if self.problem.properties is not None and self.reached.heat is not None:
            used = {p.substance: used.get(p.substance, p) for p in self.problem.properties} | used
        told = write_sources(self.edge, used.values())
        gas = self.problem.gas
        return told if gas is None else write_gas(self.edge, gas, told)

    def _gas_words(self) -> str:
        return gas_words(self.problem.gas, "fugacities and volumes")

    def _sweep(self) -> Table:
        """Return the states of the sweep, a row each; None where there is no answer."""
        states, edge = self.states, self.edge
        flow = edge.scales[self.words.flow_dimension]
        columns: dict[str, list[Any]] = {}
        units: dict[str, str] = {}
        for name, each in (("temperature", states.temperature), ("pressure", states.pressure)):
            scale, values = edge.scales[name], each[1:]
            # What is held is known where there is no answer, too.
            if name == self.problem.over and self.problem.values is not None:
                values = self.problem.values
            elif name in self.problem.hold:
                values = np.full(len(values), each[0])
            read = cells((values - scale.offset) / scale.factor)
            columns[name] = [None if v is None else float(f"{v:.14g}") for v in read]
            units[name] = scale.unit
        columns["conversion"] = cells(self.reached.conversion[1:])
        if self.reactions.rank == len(self.ids):
            for j, id_ in enumerate(self.ids):
                columns[f"extent {id_}"] = cells(states.extents[1:, j] / flow.factor)
                units[f"extent {id_}"] = flow.unit
        inside = self.feed.in_phase
        amounts = states.amounts[1:]
        total = amounts[:, inside].sum(axis=1)
        total[total == 0] = np.nan
        for i, name in enumerate(self.names):
            if inside[i] and not self.feed.solvent_unknown:
                columns[f"mole fraction {name}"] = cells(amounts[:, i] / total)
            else:
                columns[f"{self.words.flow} {name}"] = cells(amounts[:, i] / flow.factor)
                units[f"{self.words.flow} {name}"] = flow.unit
        if self.problem.gas is not None:
            columns["compressibility"] = cells(states.compressibility[1:])
        if self.reached.heat is not None and self.problem.hold.startswith("temperature"):
            scale = edge.scales[self._heat_dimension]
            columns["duty"] = cells(self.reached.heat[1:] / scale.factor)
            units["duty"] = scale.unit
        return Table(columns, units)

    def _table(self) -> Table:
        """Return the sweep, or else the composition, a row for each substance.

        What there is one of, the approach of a reaction, stands in every row.
        """
        table = self._composition() if self.problem.values is None else self._sweep()
        if self.approach is None:
            return table
        columns, units = dict(table.columns), dict(table.units)
        rows = len(next(iter(columns.values())))
        kelvin = self.edge.scales["temperature_difference"]
        for id_, found in zip(self.ids, self.approach[0], strict=True):
            for name, value in (
                (f"approach {id_}", None if found is None else found.approach),
                (f"u of approach {id_}", None if found is None else found.u),
            ):
                columns[name] = [None if value is None else value / kelvin.factor] * rows
                units[name] = kelvin.unit
        return Table(columns, units)

    def _composition(self) -> Table:
        flow = self.edge.scales[self.words.flow_dimension]
        amounts, inside = self.states.amounts[0], self.feed.in_phase
        fractions = np.where(inside, amounts, np.nan) / (amounts[inside].sum() or np.nan)
        if self.feed.solvent_unknown:
            fractions = np.full_like(fractions, np.nan)
        word = self.words.flow
        columns = {
            "substance": list(self.names),
            f"inlet {word}": (self.feed.flows / flow.factor).tolist(),
            f"equilibrium {word}": (amounts / flow.factor).tolist(),
            "mole fraction": cells(fractions),
        }
        units = {f"inlet {word}": flow.unit, f"equilibrium {word}": flow.unit}
        if self.question.outlet is not None:
            columns[f"measured {word}"] = cells(self.question.outlet.flows / flow.factor)
            units[f"measured {word}"] = flow.unit
        return Table(columns, units)

    def _page(self) -> Page:
        edge, problem = self.edge, self.problem
        key = self.names[problem.key]
        t = edge.number(self.temperature, "temperature")
        p = self._number(self.states.pressure[0], "pressure")
        at = told(t) + ("" if p is None else f" and {told(p)}")
        conversion = float(self.reached.conversion[0])
        numbers: list[tuple[str, Json | None]] = [
            (f"conversion of {key}", edge.number(conversion, "dimensionless")),
            ("temperature", t),
            ("pressure", p),
        ]
        heat = self._heat()
        for name, words in HEATS.items():
            if heat is not None and name in heat:
                numbers.append((words, heat[name]))
        verdict = f"At {at} the equilibrium conversion of {key} is {100 * conversion:.4g} %."
        if self.measured is not None:
            of_measured = self._measured(self.measured)["conversion"]
            numbers.append((f"measured conversion of {key}", of_measured))
        if self.approach is not None:
            for id_, of in self._approach().items():
                numbers.append((f"approach of {id_}", None if of is None else of["approach"]))
                if of is not None:
                    verdict += f" {_short_of(of['approach'], id_)}"
        plots = self._plots() if problem.values is not None else ()
        return Page(
            title=f"Equilibrium of {' and '.join(self.ids)}",
            verdict=verdict,
            numbers=tuple(numbers),
            plots=plots,
            tables=(
                (f"Composition at {at}", self._composition()),
                (f"Reactions at {at}", self._reactions_table()),
            ),
        )

    def _reactions_table(self) -> Table:
        """Return a row for each reaction: how far it goes, and what K it comes from."""
        flow = self.edge.scales[self.words.flow_dimension]
        constants = self._constants()
        columns: dict[str, list[Any]] = {"reaction": list(self.ids)}
        units: dict[str, str] = {}
        if self.reactions.rank == len(self.ids):
            columns["extent"] = cells(self.states.extents[0] / flow.factor)
            units["extent"] = flow.unit
        columns["ln K"] = [constants[id_]["natural_logarithm"]["value"] for id_ in self.ids]
        columns["K from"] = [constants[id_]["from"] for id_ in self.ids]
        if self.approach is not None:
            told = [self._approach()[id_] for id_ in self.ids]
            temperature = self.edge.scales["temperature"]
            name = "outlet at equilibrium at"
            columns[name] = [
                None if of is None else of["equilibrium_temperature"]["value"] for of in told
            ]
            units[name] = temperature.unit
            columns["Q/K of outlet"] = [
                None
                if of is None or of["quotient_over_constant"] is None
                else of["quotient_over_constant"]["value"]
                for of in told
            ]
        return Table(columns, units)

    def _plots(self) -> tuple[Plot, ...]:
        table, over = self._sweep(), self.problem.over
        assert over is not None
        x = table.columns[over]
        x_label = f"{over} [{table.units[over]}]"
        y = table.columns["conversion"]
        key = self.names[self.problem.key]
        plots = [
            Plot(
                f"Conversion of {key} against {over}",
                x_label,
                f"conversion of {key}",
                (Curve(key, x, y),),
                course(f"the equilibrium conversion of {key}", y, x, table.units[over]),
                table,
            )
        ]
        inside = self.feed.in_phase
        known = not self.feed.solvent_unknown
        named = list(enumerate(self.names))
        fractions = {n: f"mole fraction {n}" for i, n in named if inside[i] and known}
        flows = {n: f"{self.words.flow} {n}" for i, n in named if not (inside[i] and known)}
        for title, columns in (("Composition", fractions), ("What is not in the gas", flows)):
            if self.feed.phase == "liquid" and columns is flows:
                title = "Flows"
            if columns:
                plots.append(self._share_plot(f"{title} against {over}", columns, table, x_label))
        return tuple(plots)

    def _share_plot(
        self, title: str, columns: Mapping[str, str], table: Table, x_label: str
    ) -> Plot:
        """Return a plot of one column for each of several substances."""
        over = self.problem.over
        assert over is not None
        x = table.columns[over]
        name, column = max(
            columns.items(), key=lambda each: max(v or 0.0 for v in table.columns[each[1]])
        )
        what = column.removesuffix(f" {name}")
        shown_of = what if len(columns) > 1 else f"{what} of {name}"
        unit = table.units.get(column, "1")
        shown = (over, *columns.values())
        return Plot(
            title,
            x_label,
            shown_of if unit == "1" else f"{shown_of} [{unit}]",
            tuple(Curve(n, x, table.columns[c]) for n, c in columns.items()),
            course(
                f"the largest {what} is that of {name}, which",
                table.columns[column],
                x,
                table.units[over],
                unit,
            ),
            Table(
                {n: table.columns[n] for n in shown},
                {n: table.units[n] for n in shown if n in table.units},
            ),
        )


def _short_of(approach: Json, reaction: str) -> str:
    """Say what an approach means."""
    size = {**approach, "value": abs(approach["value"])}
    side = "short of" if approach["value"] >= 0 else "beyond"
    told_ = f"The measured outlet is {told(size)} {side} the equilibrium of {reaction}"
    if abs(approach["value"]) <= 2 * approach["u"]:
        told_ += ", which its readings cannot tell from it"
    return told_ + "."


def _power(ln: float) -> float:
    """Return e to a power; not a number where that is beyond what a number of a computer holds."""
    return math.exp(ln) if abs(ln) < LARGEST_EXPONENT else math.nan


def _finite(value: Any) -> float | None:
    return float(value) if np.isfinite(value) else None
