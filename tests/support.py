"""What tests of the service share: requests, refusals, the published contract."""

from __future__ import annotations

import copy
import json
from functools import cache
from typing import Any

from flask.testing import FlaskClient
from jsonschema import Draft202012Validator
from werkzeug.test import TestResponse

from schemas.contract import OPERATIONS, openapi_document

SHIFT_FEED = {
    "phase": "gas",
    "temperature": "620 K",
    "pressure": "25 bar",
    "flows": {
        "CO": "120 kmol/h",
        "H2O": "360 kmol/h",
        "CO2": "60 kmol/h",
        "H2": "210 kmol/h",
        "N2": "90 kmol/h",
        "CH4": "10 kmol/h",
    },
}
SHIFT: dict[str, Any] = {
    "reactions": [{"id": "shift", "equation": "CO + H2O <=> CO2 + H2"}],
    "key": "CO",
    "feed": SHIFT_FEED,
    "conversions": [0.8],
}


def changed(document: Any, **places: Any) -> Any:
    """Return a copy of a document with values set at pointers written ``a__b__0``.

    ``...`` takes the place away.
    """
    made = copy.deepcopy(document)
    for path, value in places.items():
        *way, last = path.split("__")
        target = made
        for name in way:
            target = target[int(name) if isinstance(target, list) else name]
        key: Any = int(last) if isinstance(target, list) else last
        if value is ...:
            del target[key]
        else:
            target[key] = value
    return made


@cache
def contract() -> dict[str, Any]:
    return openapi_document()


def _closed(node: Any, *, named: bool = False) -> Any:
    """Close every object of an answer that the published schema leaves open."""
    if isinstance(node, dict):
        done = {k: _closed(v, named=k in ("properties", "schemas")) for k, v in node.items()}
        is_object = node.get("type") == "object" and "properties" in node
        if not named and is_object and node.get("additionalProperties", True) is True:
            done["additionalProperties"] = False
        return done
    return [_closed(v) for v in node] if isinstance(node, list) else node


@cache
def answer_validator(operation: str, status: int) -> Draft202012Validator:
    """Return the validator of an operation's answers, in the closed variant."""
    op = next(op for op in OPERATIONS if op.name == operation)
    document = contract()
    responses = document["paths"][op.path][op.method.lower()]["responses"]
    content = responses[str(status)]["content"]
    media = "application/json" if status == 200 else "application/problem+json"
    components = _closed(document["components"])
    return Draft202012Validator({**content[media]["schema"], "components": components})


@cache
def request_validator(operation: str) -> Draft202012Validator:
    """Return the validator of an operation's request."""
    op = next(op for op in OPERATIONS if op.name == operation)
    document = contract()
    body = document["paths"][op.path]["post"]["requestBody"]["content"]["application/json"]
    return Draft202012Validator({**body["schema"], "components": document["components"]})


def post(client: FlaskClient, operation: str, document: Any, **kwargs: Any) -> TestResponse:
    """Post to an operation, and hold whatever comes back against the published contract."""
    path = next(op.path for op in OPERATIONS if op.name == operation)
    # Not through the client's own JSON, which would sort the names.
    body = json.dumps(document)
    response = client.post(path, data=body, content_type="application/json", **kwargs)
    if response.mimetype != "text/csv":
        held_to_contract(operation, response)
    return response


def held_to_contract(operation: str, response: TestResponse) -> None:
    faults = [
        f"{'/'.join(map(str, e.absolute_path))}: {e.message[:300]}"
        for e in answer_validator(operation, response.status_code).iter_errors(response.get_json())
    ]
    assert not faults, faults


def result(client: FlaskClient, operation: str, document: Any) -> dict[str, Any]:
    """Return the result of a request that must be answered."""
    response = post(client, operation, document)
    assert response.status_code == 200, response.get_data(as_text=True)
    answered: dict[str, Any] = response.get_json()["result"]
    return answered


def assert_refused(
    response: TestResponse, status: int, code: str, place: str | None = None
) -> dict[str, Any]:
    """Hold a refusal against its status, code and (in any locator) place; return the fault."""
    document = response.get_json()
    assert response.status_code == status, document
    assert response.mimetype == "application/problem+json"
    assert document["status"] == status
    faults = document["errors"]
    for fault in faults:
        locators = set(fault) & {"pointer", "parameter", "header"}
        assert len(locators) == 1, fault
    matching = [
        fault
        for fault in faults
        if fault["code"] == code
        and (place is None or place in (fault.get(k) for k in ("pointer", "parameter", "header")))
    ]
    assert matching, document
    return matching[0]


def value(number: dict[str, Any], unit: str | None = None) -> float:
    """Return the value of a Number, its unit checked."""
    if unit is not None:
        assert number["unit"] == unit, number
    return float(number["value"])
