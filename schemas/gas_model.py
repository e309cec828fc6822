"""How a gas is modelled, on the wire."""

from __future__ import annotations

from collections.abc import Callable, Mapping

from marshmallow import fields

from core.arrays import BoolArray
from core.errors import Refused, Subject
from core.reactions.reaction_set import ReactionSet
from core.real_gas.cubic import GasModel
from core.real_gas.equation import KnownGas, gas_of
from core.records import record
from schemas.edge import EdgeMap, Json, RequestReader
from schemas.fields import Choice, List, Number, Text, describe
from schemas.shape import ClosedSchema, child
from schemas.thermochemistry import write_critical

EQUATIONS = {
    "peng-robinson": "the equation of Peng and Robinson (1976)",
    "soave-redlich-kwong": "the equation of Soave, Redlich and Kwong (Soave 1972)",
}


def gas_model() -> Choice:
    """Return the field that chooses how a gas is modelled."""
    return Choice(
        "ideal",
        *EQUATIONS,
        load_default="ideal",
        metadata=describe(
            "An equation of state takes critical constants and acentric factors from the packaged"
            " data, or from 'species'."
        ),
    )


class InteractionSchema(ClosedSchema):
    """The interaction of two substances in a gas model."""

    between = List(
        Text(), at_least=2, at_most=2, required=True, metadata=describe("", examples=[["N2", "H2"]])
    )
    parameter = Number(
        at_least=-1,
        at_most=1,
        required=True,
        metadata=describe("k of a_ij = sqrt(a_i a_j) (1 - k); left out: 0."),
    )


def interactions() -> List:
    """Return the field of the interaction parameters."""
    return List(
        fields.Nested(InteractionSchema),
        at_least=0,
        at_most=200,
        metadata=describe("Of an equation of state; a pair left out has none."),
    )


def places(reader: RequestReader, reactions: ReactionSet) -> Callable[[str], Subject]:
    """Return what a fault about a substance's data is about, by its name."""

    def place(name: str) -> Subject:
        declared: Subject = ("species", name)
        return declared if declared in reader.places else ("substances", name)

    for name in reactions.names:
        if ("species", name) not in reader.places and ("substances", name) not in reader.places:
            reader.at(("substances", name), "/reactions")
    return place


@record()
class GasReader:
    """Reads how a request models its gases.

    Attributes
    ----------
    reader : RequestReader
    reactions : ReactionSet
    model : GasModel or None
        None: ideal.
    interactions : Mapping
        k_ij by positions among all substances.
    """

    reader: RequestReader
    reactions: ReactionSet
    model: GasModel | None
    interactions: Mapping[tuple[int, int], float]

    @classmethod
    def of(cls, request: Json, reader: RequestReader, reactions: ReactionSet) -> GasReader:
        """Return the reader of a request, its interactions read."""
        reader.at(("gas_model",), "/gas_model")
        if "interactions" not in request and request["gas_model"] == "ideal":
            return cls(reader, reactions, None, {})
        model = None if request["gas_model"] == "ideal" else request["gas_model"]
        if model is None and request["interactions"]:
            reader.fault(
                "field-not-used",
                "/interactions",
                "an ideal gas has none; name a gas model, or leave them out",
            )
        return cls(reader, reactions, model, _read_interactions(request, reader, reactions))

    @property
    def real(self) -> bool:
        """Whether a gas model is named that is not ideal."""
        return self.model is not None

    def known(self, in_gas: BoolArray) -> KnownGas | None:
        """Return the gas model of a gas of these substances; None if ideal, or after a fault."""
        if self.model is None:
            return None
        place = places(self.reader, self.reactions)
        try:
            return gas_of(self.model, self.reactions, in_gas, place, self.interactions)
        except Refused as refused:
            self.reader.collect(refused)
            return None

    def no_gas(self) -> None:
        """Refuse a gas model where there is no gas."""
        if self.real:
            self.reader.fault(
                "field-not-used", "/gas_model", "there is no gas in this account; leave it out"
            )


def _read_interactions(
    request: Json, reader: RequestReader, reactions: ReactionSet
) -> dict[tuple[int, int], float]:
    found: dict[tuple[int, int], float] = {}
    for k, said in enumerate(request.get("interactions", ())):
        pair_of = []
        for m, name in enumerate(said["between"]):
            i = reactions.find(name)
            # Without any substance those of the request have been refused.
            if i is None and reactions.names:
                reader.fault(
                    "unknown-substance",
                    child("/interactions", k, "between", m),
                    f"found {name!r}; the substances of this request are"
                    f" {', '.join(reactions.names)}",
                )
            elif i is not None:
                pair_of.append(i)
        if len(pair_of) < 2:
            continue
        pair = (min(pair_of), max(pair_of))
        if pair[0] == pair[1] or pair in found:
            reader.fault(
                "conflicting-fields",
                child("/interactions", k, "between"),
                "a pair is two substances, and each pair stands once",
            )
        found[pair] = said["parameter"]
    return found


def gas_words(gas: KnownGas | None, what: str = "volumes") -> str:
    """Return what the method of an answer says of its gas model."""
    return "" if gas is None else f"; {what} by {EQUATIONS[gas.equation.model]}"


def write_gas(edge: EdgeMap, gas: KnownGas, told: Json) -> Json:
    """Return the sources of the properties that an answer used, with those of its gas model."""
    for name, (entry, constants) in gas.constants.items():
        told.setdefault(name, {"phase": "gas"}).update(write_critical(edge, entry, constants))
    return told
