"""The published contract: an OpenAPI 3.1 document made from the schemas.

The document is packaged (``schemas/published/openapi.json``), so that serving
it needs no library and a reviewer sees in a diff what a change does to callers.
"""

from __future__ import annotations

import json
import warnings
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from typing import Any

from marshmallow import Schema, fields

from schemas.conversion import ConversionRequest
from schemas.conversion_answer import ConversionAnswer
from schemas.edge import Json
from schemas.equilibrium import EquilibriumRequest
from schemas.equilibrium_answer import EquilibriumAnswer
from schemas.examples import EXAMPLES
from schemas.fields import LimitSchema, StrictField, UncertainSchema, quantity_components
from schemas.problem import ProblemSchema
from schemas.reactors.operating_point import OperatingPointAnswer, OperatingPointRequest
from schemas.reactors.rating import RatingAnswer, RatingRequest
from schemas.reactors.volume import VolumeAnswer, VolumeRequest
from schemas.stoichiometric_table import StoichiometricTableAnswer, StoichiometricTableRequest

JSON = "application/json"
CSV = "text/csv"
HTML = "text/html"
PROBLEM_JSON = "application/problem+json"

CONTRACT_VERSION = "1.0.0"
"""Of the v1 contract: the minor number counts compatible extensions."""

DESCRIPTION = """\
The mole account of a plant's reactors: stateless, JSON in and JSON out.

**Quantities.** A number with a unit, `"12.5 kmol/h"`, or an object
`{"value": 12.5, "unit": "kmol/h", "u": 0.1}` with its standard uncertainty; a bare number where
the quantity is dimensionless. Normal, standard and standard-cubic-foot gas volumes are amounts of
substance (ideal molar volume at 273.15 K and 101.325 kPa, 288.15 K and 101.325 kPa, 60 degF and
14.696 psia). Gauge pressures are read with `atmospheric_pressure`.

**Numbers in answers.** Each has its unit: the one asked for in `report_in`, else that of the field
answered, else the first used of that dimension in the request, else a default. What cannot be
computed is null with a note; what does not apply is absent.

**Streams.** A stream states its phase and exactly one of: `flows` (by substance, molar or mass);
`amounts` (a batch); `flow` with `analysis`; `concentrations` with `volumetric_flow` (a batch:
`volume`). `streams` holds several metered ones. A volumetric gas `flow` states its `meter`'s
temperature and pressure. A liquid needs `volumetric_flow`, `density` or `concentrations` before it
has concentrations.

**Refusals.** Every one is a problem document (RFC 9457) whose `errors` name the place at fault, by
JSON Pointer, what was found, what is allowed and how to mend it. 400: the document breaks this
contract. 422: it obeys the contract and cannot be computed.

**Cautions.** Results are advisory: screening calculations, no relief, runaway or flammability
assessment, and not to be wired to safety functions. Follow local codes and licensed practice.
"""


@dataclass(frozen=True)
class Operation:
    """One route, as the contract knows it."""

    name: str
    method: str
    path: str
    summary: str
    media_types: tuple[str, ...] = (JSON,)
    request: type[Schema] | None = None
    answer: type[Schema] | None = None
    parameters: tuple[str, ...] = ()


OPERATIONS = (
    Operation("index", "GET", "/", "the routes, and a request to paste"),
    Operation(
        "stoichiometric-table",
        "POST",
        "/v1/stoichiometric-table",
        "the stoichiometric table at given conversions or extents",
        (JSON, CSV),
        StoichiometricTableRequest,
        StoichiometricTableAnswer,
    ),
    Operation(
        "conversion",
        "POST",
        "/v1/conversion",
        "conversion, yields, closures and reconciliation from an outlet analysis",
        (JSON,),
        ConversionRequest,
        ConversionAnswer,
    ),
    Operation(
        "volume",
        "POST",
        "/v1/volume",
        "the reactor size that a target needs",
        (JSON, CSV, HTML),
        VolumeRequest,
        VolumeAnswer,
    ),
    Operation(
        "rating",
        "POST",
        "/v1/rating",
        "what comes out of a reactor of a known size",
        (JSON, CSV, HTML),
        RatingRequest,
        RatingAnswer,
    ),
    Operation(
        "operating-point",
        "POST",
        "/v1/operating-point",
        "the feed rate, temperature or pressure at which a reactor meets a target",
        (JSON, CSV, HTML),
        OperatingPointRequest,
        OperatingPointAnswer,
    ),
    Operation(
        "equilibrium",
        "POST",
        "/v1/equilibrium",
        "the composition at equilibrium, and how far an outlet is from it",
        (JSON, CSV, HTML),
        EquilibriumRequest,
        EquilibriumAnswer,
    ),
    Operation("contract", "GET", "/v1/openapi.json", "this contract"),
    Operation("problems", "GET", "/problems", "the codes of problems and of notes in answers"),
    Operation(
        "problem",
        "GET",
        "/problems/{code}",
        "what the code of a problem or a note means",
        (JSON, HTML),
        parameters=("code",),
    ),
    Operation("health", "GET", "/healthz", "whether the process is alive"),
    Operation("ready", "GET", "/readyz", "whether the process can compute"),
)


def operation(name: str) -> Operation:
    """Return the operation called ``name``."""
    return next(op for op in OPERATIONS if op.name == name)


def openapi_document() -> Json:
    """Return the OpenAPI document made from the schemas as they are now."""
    # Only here: serving the packaged document needs none of it.
    from apispec import APISpec
    from apispec.ext.marshmallow import MarshmallowPlugin

    plugin = MarshmallowPlugin(schema_name_resolver=_component_name)
    spec = APISpec(
        title="Molwright",
        version=CONTRACT_VERSION,
        openapi_version="3.1.0",
        info={"description": DESCRIPTION, "license": {"name": "Apache-2.0"}},
        plugins=[plugin],
    )
    converter = plugin.converter
    assert converter is not None

    def publish(self: Any, field: fields.Field[Any], **_: Any) -> Json:
        if not isinstance(field, StrictField):
            return {}
        return field.published(self.field2property)

    converter.add_attribute_function(publish)  # type: ignore[no-untyped-call]
    for name, component in quantity_components().items():
        spec.components.schema(name, component)
    spec.components.schema("Uncertain", schema=UncertainSchema)
    spec.components.schema("Limit", schema=LimitSchema)
    spec.components.schema("Problem", schema=ProblemSchema)
    with warnings.catch_warnings():
        # One component under two modifiers would be a fault of ours, and a test compares them.
        warnings.simplefilter("error")
        for op in OPERATIONS:
            spec.path(path=op.path, operations={op.method.lower(): _described(op)})
    document: Json = spec.to_dict()
    limit = document["components"]["schemas"]["Limit"]
    limit["minProperties"] = limit["maxProperties"] = 1
    return document


def _component_name(schema: Any) -> str:
    name = schema.__name__ if isinstance(schema, type) else type(schema).__name__
    return name.removesuffix("Schema")


def _described(op: Operation) -> Json:
    described: Json = {
        "operationId": op.name,
        "summary": op.summary,
        "tags": ["calculations" if op.request else "the service itself"],
        "responses": _responses(op),
    }
    parameters: list[Json] = [
        {
            "name": name,
            "in": "path",
            "required": True,
            "description": "A code of a problem or a note.",
            "schema": {"type": "string"},
        }
        for name in op.parameters
    ]
    if JSON in op.media_types and op.name not in UNVARIED:
        parameters.append(
            {
                "name": "pretty",
                "in": "query",
                "description": "1 indents the answer.",
                "schema": {"type": "string", "enum": ["0", "1"], "default": "0"},
            }
        )
    parameters.append(
        {
            "name": "X-Request-ID",
            "in": "header",
            "description": "Names the request in the log and in the answer; else one is made.",
            "schema": {"type": "string", "pattern": "^[A-Za-z0-9._-]{1,64}$"},
        }
    )
    described["parameters"] = parameters
    if op.request is not None:
        described["requestBody"] = {
            "required": True,
            "content": {
                JSON: {
                    "schema": op.request,
                    "examples": {
                        example.name: {"summary": example.title, "value": example.request}
                        for example in EXAMPLES
                        if example.operation == op.name
                    },
                }
            },
        }
    return described


UNVARIED = ("contract", "health", "ready")
"""Operations that answer the same to everybody."""


def _header(description: str) -> Json:
    return {"description": description, "schema": {"type": "string"}}


REQUEST_ID = {"X-Request-ID": _header("The request's own, or the one it was given.")}
ENTITY_TAG = {"ETag": _header("Of this contract: sent in If-None-Match, it saves the document.")}
CSV_PROVENANCE = {
    "Molwright-Request-Digest": _header("With CSV: the digest that the JSON answer holds."),
    "Molwright-Release": _header("With CSV: the release that answered."),
}


def _responses(op: Operation) -> Json:
    content: Json = {}
    for media in op.media_types:
        schema: Any = {"type": "string"} if media != JSON else op.answer or {"type": "object"}
        content[media] = {"schema": schema}
        if media == JSON and op.answer is not None:
            content[media]["examples"] = {
                example.name: {"summary": example.title, "value": example.answer()}
                for example in EXAMPLES
                if example.operation == op.name and example.status == 200
            }
    headers = REQUEST_ID
    if CSV in op.media_types:
        headers = headers | CSV_PROVENANCE
    if op.name == "contract":
        headers = headers | ENTITY_TAG
    responses: Json = {"200": {"description": op.summary, "headers": headers, "content": content}}
    if op.name == "contract":
        responses["304"] = {"description": "as If-None-Match says", "headers": headers}
    for status, meaning in sorted(_refusals(op).items()):
        problem: Json = {"schema": ProblemSchema}
        examples = {
            example.name: {"summary": example.title, "value": example.answer()}
            for example in EXAMPLES
            if example.operation == op.name and str(example.status) == status
        }
        if examples:
            problem["examples"] = examples
        responses[status] = {
            "description": meaning,
            "headers": REQUEST_ID,
            "content": {PROBLEM_JSON: problem},
        }
    return responses


def _refusals(op: Operation) -> dict[str, str]:
    refusals = {"500": "a fault of the service", "400": "a query parameter that is not known"}
    if op.name in ("health", "ready"):
        return refusals
    refusals["406"] = "no form that the client accepts"
    if op.request is not None:
        refusals |= {
            "400": "the document breaks this contract, or a query parameter is not known",
            "413": "the body is too large",
            "415": "the body is not declared as JSON in UTF-8",
            "422": "the document obeys this contract and cannot be computed",
        }
    if op.parameters:
        refusals["404"] = "no such code"
    return refusals


def render(document: Json) -> bytes:
    """Return the document as it is packaged."""
    return (json.dumps(document, indent=1, ensure_ascii=False) + "\n").encode()


PUBLISHED = files("schemas").joinpath("published/openapi.json")
"""Where the document is packaged."""


@cache
def published_text() -> bytes:
    """Return the packaged OpenAPI document."""
    return PUBLISHED.read_bytes()
