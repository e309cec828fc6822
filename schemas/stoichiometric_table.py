"""The stoichiometric table on the wire."""

from __future__ import annotations

from functools import lru_cache
from typing import Any

import numpy as np
from marshmallow import fields

from core.errors import Note
from core.mole_account.stoichiometric_table import (
    OutletConditions,
    Role,
    StoichiometricTable,
    TableProblem,
)
from core.reactions.reaction_set import ReactionSet
from core.substances.property_data import PACKAGED
from schemas.answer import ATOMIC_WEIGHTS, Answer
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.feed import (
    StreamResultSchema,
    is_batch,
    read_feed,
    words_of,
    write_known_stream,
    write_stream,
)
from schemas.fields import Choice, List, Map, Number, Quantity, describe
from schemas.gas_model import GasReader, gas_model, gas_words, interactions, write_gas
from schemas.requests import NOTHING_KNOWN, AccountSchema, read_key, read_request
from schemas.results import NumberSchema, OpenSchema, envelope, number, numbers_by_name
from schemas.shape import ClosedSchema, child
from schemas.streams import StreamSchema
from schemas.table import Table

MAX_CONVERSIONS = 1000


class OutletConditionsSchema(ClosedSchema):
    """Conditions of the outlet; each left out is that of the feed."""

    temperature = Quantity(metadata=describe("", examples=["600 degC"]))
    pressure = Quantity(metadata=describe("", examples=["0.22 barg"]))
    compressibility = Number(
        at_least=0.01,
        at_most=10,
        metadata=describe(
            "Z of a gas, in place of that by a gas model; left out: by the gas model, else that of"
            " the feed."
        ),
    )


class StoichiometricTableRequest(AccountSchema):
    """A feed, and the conversions or extents to keep its account at."""

    feed = fields.Nested(
        StreamSchema, required=True, metadata=describe("What is fed, or charged as a batch.")
    )
    conversions = List(
        Quantity(),
        at_most=MAX_CONVERSIONS,
        metadata=describe(
            "Of the key. Exactly one of conversions and extents.", examples=[[0.8], ["80 %"]]
        ),
    )
    extents = Map(
        Quantity(),
        at_most=50,
        metadata=describe("By reaction; one left out is zero.", examples=[{"r1": "30 kmol/h"}]),
    )
    outlet = fields.Nested(OutletConditionsSchema)
    hold = Choice(
        "volume",
        "pressure",
        metadata=describe("What a batch of gas keeps. Batches only.", default="volume"),
    )
    gas_model = gas_model()
    interactions = interactions()


_REQUEST = StoichiometricTableRequest()


def read(document: Any) -> tuple[TableProblem, EdgeMap]:
    """Return the problem that a request states, and its edge map.

    Raises
    ------
    ShapeError, MeaningError
    """
    (problem, per_key), edge = read_request(_REQUEST, document, ("feed",), _read_problem)
    return problem, edge.per_mole_of_key() if per_key else edge


def _read_problem(
    request: Json, reader: RequestReader, reactions: ReactionSet
) -> tuple[TableProblem, bool] | None:
    """Return the problem, and whether it is kept per mole of key fed."""
    key = read_key(request, reader, reactions)
    models = GasReader.of(request, reader, reactions)
    feed = read_feed(request["feed"], "/feed", reader, reactions, key, models)
    inlet = None if feed is None else feed.stream
    outlet = _read_outlet(request.get("outlet", {}), reader)
    batch = is_batch(request["feed"])
    asked = _read_asked(request, reader, reactions, batch)
    if "hold" in request and not batch:
        reader.fault("field-not-used", "/hold", "a flow holds nothing; state 'amounts', a batch")
    if feed is None or inlet is None:
        return None
    problem = TableProblem(
        reactions=reactions,
        key=key,
        inlet=inlet,
        outlet=outlet,
        hold=request.get("hold", "volume"),
        gas=feed.gas if inlet.phase == "gas" else None,
        **asked,
    )
    return problem, feed.per_mole_of_key


def _read_outlet(document: Json, reader: RequestReader) -> OutletConditions:
    reader.at(("outlet",), "/outlet")
    stated = {}
    for name in ("temperature", "pressure"):
        if name in document:
            found = reader.quantity(
                document[name], child("/outlet", name), ("outlet", name), name, above=0
            )
            stated[name] = None if found is None else found.value
    return OutletConditions(compressibility=document.get("compressibility"), **stated)


def _read_asked(request: Json, reader: RequestReader, reactions: ReactionSet, batch: bool) -> Json:
    conversions, extents = request.get("conversions"), request.get("extents")
    if (conversions is None) == (extents is None):
        found = "neither" if conversions is None else "both"
        reader.fault(
            "conversions-or-extents", "", f"found {found}; state 'conversions' or 'extents'"
        )
        return {}
    if conversions is not None:
        reader.at(("conversions",), "/conversions")
        found_all = [
            reader.quantity(raw, f"/conversions/{i}", ("conversions", i), "dimensionless")
            for i, raw in enumerate(conversions)
        ]
        values = [found.value for found in found_all if found is not None]
        return {"conversions": np.array(values)}
    assert extents is not None
    reader.at(("extents",), "/extents")
    dimension = words_of(batch).flow_dimension
    ids = [reaction.id for reaction in reactions.reactions]
    row = np.zeros(len(ids))
    for name, raw in extents.items():
        pointer = child("/extents", name)
        if name not in ids and reactions is not NOTHING_KNOWN:
            reader.fault(
                "unknown-reaction", pointer, f"found {name!r}; the reactions are {', '.join(ids)}"
            )
        extent = reader.quantity(raw, pointer, ("extents", name), dimension)
        if extent is not None and name in ids:
            row[ids.index(name)] = extent.value
    left_out = [id_ for id_ in ids if id_ not in extents]
    if left_out:
        reader.assumed.append(
            Note(
                "extents-left-out",
                f"no extent is stated of {', '.join(left_out)}: taken as zero",
                subject=("extents",),
            )
        )
    return {"extents": row[None, :]}


class SpeciesRoleSchema(OpenSchema):
    """What a substance is to the account."""

    role = fields.String(
        required=True, metadata=describe("", enum=["key", "reactant", "product", "inert"])
    )
    coefficients = Map(fields.Float(), at_least=0, metadata=describe("By reaction."))
    theta = fields.Nested(NumberSchema, required=True)


class ExpressionSchema(OpenSchema):
    """Flow (batch: amount) and concentration as formulas."""

    flow = fields.String()
    amount = fields.String()
    concentration = fields.String()


class StateSchema(OpenSchema):
    """The account at one conversion, or at one set of extents."""

    conversion = fields.Nested(NumberSchema, required=True)
    extents = numbers_by_name(text="By reaction; null where dependent reactions leave them open.")
    changes = numbers_by_name(text="By substance.")
    changes_by_reaction = Map(
        numbers_by_name(),
        at_least=0,
        metadata=describe("For several reactions: by reaction, then by substance."),
    )
    outlet = fields.Nested(StreamResultSchema, required=True)
    constant_flow_error = number(
        "(1 + epsilon X)(T/T0)(P0/P)(Z/Z0) - 1: what the constant-flow equations put on"
        " concentrations."
    )


class ConstantFlowSchema(OpenSchema):
    """Whether the constant-flow equations hold here, and which condition fails."""

    holds = fields.Boolean(required=True)
    fails_because = fields.List(
        fields.String(
            metadata=describe(
                "",
                enum=[
                    "moles-change",
                    "temperature-changes",
                    "pressure-changes",
                    "compressibility-changes",
                ],
            )
        ),
        required=True,
    )


class StoichiometricTableResult(OpenSchema):
    """The stoichiometric table."""

    key = fields.String(required=True)
    limiting = fields.String(required=True, allow_none=True)
    largest_conversion = number(required=True)
    smallest_conversion = number("Where a reaction is reversible: the reverse limit.")
    delta = number("For one reaction.")
    epsilon = number("For one reaction in a gas; over the substances of the gas.")
    key_mole_fraction = number("Of the feed's own phase.")
    gas_model = fields.String(metadata=describe("Where it is not ideal."))
    species = numbers_by_name(SpeciesRoleSchema, required=True)
    inlet = fields.Nested(StreamResultSchema, required=True)
    states = fields.List(fields.Nested(StateSchema), required=True)
    expressions = numbers_by_name(ExpressionSchema)
    constant_flow = fields.Nested(ConstantFlowSchema, required=True)


StoichiometricTableAnswer = envelope("StoichiometricTableAnswer", StoichiometricTableResult)

METHOD = "mole account in extents of reaction, F = F0 + xi nu; limits by linear programming"


def write(table: StoichiometricTable, edge: EdgeMap) -> Answer:
    """Return the answer that holds a table."""
    problem, reach = table.problem, table.range
    reactions, names = problem.reactions, problem.reactions.names
    result: Json = {
        "key": names[problem.key],
        "limiting": None if reach.limiting is None else names[reach.limiting],
        "largest_conversion": _plain(reach.largest),
    }
    if any(reaction.reversible for reaction in reactions.reactions):
        result["smallest_conversion"] = _plain(reach.smallest)
    if table.delta is not None:
        result["delta"] = _plain(table.delta)
    if table.epsilon is not None:
        result["epsilon"] = _plain(table.epsilon)
    if table.key_mole_fraction is not None:
        result["key_mole_fraction"] = _plain(table.key_mole_fraction)
    gas = problem.gas
    if gas is not None:
        result["gas_model"] = gas.equation.model
    result["species"] = _species(table)
    result["inlet"] = write_known_stream(edge, names, problem.inlet)
    result["states"] = _states(table, edge)
    word = words_of(problem.inlet.batch).flow
    result["expressions"] = {
        name: {word: flow}
        if concentration is None
        else {word: flow, "concentration": concentration}
        for name, (flow, concentration) in zip(names, table.expressions, strict=True)
    }
    result["constant_flow"] = {"holds": table.holds, "fails_because": list(table.fails_because)}
    return Answer(
        result=result,
        notes=edge.notes((*edge.read_notes, *table.notes)),
        assumed=edge.notes((*edge.read_assumed, *table.assumed)),
        method=METHOD + gas_words(gas),
        data=ATOMIC_WEIGHTS if gas is None else f"{ATOMIC_WEIGHTS}; {PACKAGED}",
        properties=None if gas is None else write_gas(edge, gas, {}),
        table=lambda: _table(table, edge),
    )


def _plain(value: float) -> Json:
    return {"value": value, "unit": "1"}


def _species(table: StoichiometricTable) -> Json:
    return {
        name: {**role, "theta": _plain(theta)}
        for (name, role), theta in zip(
            _told_roles(table.problem.reactions, table.roles), table.theta.tolist(), strict=True
        )
    }


@lru_cache(maxsize=256)
def _told_roles(reactions: ReactionSet, roles: tuple[Role, ...]) -> list[tuple[str, Json]]:
    """Return role and coefficients of each substance, which do not depend on the feed."""
    ids = [reaction.id for reaction in reactions.reactions]
    told = []
    for name, role, column in zip(reactions.names, roles, reactions.nu.T.tolist(), strict=True):
        said: Json = {"role": role}
        if role != "inert":
            said["coefficients"] = {j: nu for j, nu in zip(ids, column, strict=True) if nu}
        told.append((name, said))
    return told


def _states(table: StoichiometricTable, edge: EdgeMap) -> list[Json]:
    problem, states = table.problem, table.states
    reactions, names, inlet = problem.reactions, problem.reactions.names, problem.inlet
    ids = [reaction.id for reaction in reactions.reactions]
    scale = edge.scales[words_of(inlet.batch).flow_dimension]

    def flows(labels: Any, values: Any) -> Json:
        return {
            label: {"value": value / scale.factor, "unit": scale.unit}
            for label, value in zip(labels, values, strict=True)
        }

    written = []
    z = states.compressibility
    for k, conversion in enumerate(states.conversions.tolist()):
        state: Json = {"conversion": edge.number(conversion, "dimensionless")}
        extents = None if states.extents is None else states.extents[k]
        state["extents"] = dict.fromkeys(ids) if extents is None else flows(ids, extents.tolist())
        state["changes"] = flows(names, states.changes[k].tolist())
        if len(ids) > 1 and extents is not None:
            state["changes_by_reaction"] = {
                id_: flows(names, (xi * nu).tolist())
                for id_, xi, nu in zip(ids, extents, reactions.nu, strict=True)
            }
        volumes, pressures = states.volumetric_flows, states.pressures
        state["outlet"] = write_stream(
            edge,
            names,
            states.flows[k],
            inlet.in_phase,
            batch=inlet.batch,
            volume=None if volumes is None else float(volumes[k]),
            temperature=states.temperature,
            pressure=None if pressures is None else float(pressures[k]),
            compressibility=z if isinstance(z, float) else float(z[k]),
            fractions=not inlet.solvent_unknown,
        )
        state["constant_flow_error"] = _plain(float(states.constant_flow_error[k]))
        written.append(state)
    return written


def _table(table: StoichiometricTable, edge: EdgeMap) -> Table:
    """Return the table as rows, one for each substance of each state."""
    problem, states = table.problem, table.states
    names, inlet = problem.reactions.names, problem.inlet
    words = words_of(inlet.batch)
    flow = edge.scales[words.flow_dimension]
    concentration = edge.scales["concentration"]
    count = states.conversions.size
    columns: dict[str, list[Any]] = {
        "conversion": np.repeat(states.conversions, len(names)).tolist(),
        "substance": list(names) * count,
        "role": list(table.roles) * count,
    }
    for reaction, nu in zip(
        problem.reactions.reactions, problem.reactions.nu.tolist(), strict=True
    ):
        columns[f"coefficient {reaction.id}"] = nu * count
    columns["theta"] = table.theta.tolist() * count
    columns[f"inlet {words.flow}"] = (inlet.flows / flow.factor).tolist() * count
    columns["change"] = (states.changes / flow.factor).ravel().tolist()
    columns[f"outlet {words.flow}"] = (states.flows / flow.factor).ravel().tolist()
    columns["mole fraction"] = (
        [None] * (count * len(names))
        if inlet.solvent_unknown
        else _cells(states.mole_fractions.ravel())
    )
    concentrations = states.concentrations
    columns["concentration"] = (
        [None] * (count * len(names))
        if concentrations is None
        else _cells(concentrations.ravel() / concentration.factor)
    )
    columns["constant-flow error"] = np.repeat(states.constant_flow_error, len(names)).tolist()
    units = {
        f"inlet {words.flow}": flow.unit,
        "change": flow.unit,
        f"outlet {words.flow}": flow.unit,
        "concentration": concentration.unit,
    }
    return Table(columns, units)


def _cells(values: Any) -> list[float | None]:
    """Return numbers, with None for a substance outside the phase."""
    return [None if value != value else value for value in values.tolist()]
