"""The request's body: read strictly, before anything is made of it."""

from __future__ import annotations

import json
import re
from typing import Any

import orjson
from flask import Request, current_app
from werkzeug.exceptions import RequestEntityTooLarge

from schemas.shape import LocatedFault, ShapeError, child
from service.problem_details import HttpFault

MAX_DEPTH = 32
JSON = "application/json"

# A string of the text, and the colon behind it where it is a member's name.
_STRING = re.compile(rb'"[^"\\]*(?:\\.[^"\\]*)*"(\s*:)?')


def read_json(request: Request) -> Any:
    """Return the parsed JSON body.

    Raises
    ------
    HttpFault
        The body is not declared as JSON (415) or is too large (413).
    ShapeError
        It is not JSON, nests too deep, or names a member twice.
    """
    if request.mimetype != JSON:
        found = request.headers.get("Content-Type")
        said = "no Content-Type" if found is None else f"Content-Type: {found[:80]}"
        raise HttpFault(
            415,
            "unsupported-media-type",
            f"found {said}; send the header 'Content-Type: {JSON}'",
            header="Content-Type",
        )
    return parse_json(_body(request))


def _body(request: Request) -> bytes:
    limit = current_app.config["MAX_CONTENT_LENGTH"]
    declared = request.content_length
    try:
        body = request.get_data(cache=True)
        if declared is None:
            # Reading stops at the limit without a word; what goes on behind it raises here.
            request.stream.read(1)
    except RequestEntityTooLarge:
        raise HttpFault(
            413,
            "body-too-large",
            f"the body is larger than {limit} bytes, the most that this service reads",
            header="Content-Length",
        ) from None
    if declared is not None and len(body) < declared:
        # The server hands over what came before the client broke off; it may even parse.
        raise HttpFault(
            400,
            "malformed-http",
            f"the body ends after {len(body)} of the {declared} bytes declared; send all of them",
            header="Content-Length",
        )
    return body


def parse_json(body: bytes) -> Any:
    """Return the document in ``body``, read strictly: see :func:`read_json`."""
    try:
        document = orjson.loads(body)
    except orjson.JSONDecodeError as error:
        where = f"line {error.lineno} column {error.colno}"
        found = "an empty body" if not body.strip() else f"{error.msg} at {where}"
        raise ShapeError(
            (LocatedFault("not-json", f"found {found}; a JSON document is needed (RFC 8259)", ""),)
        ) from None
    names, depth = _survey(document)
    if depth > MAX_DEPTH:
        text = f"found a document nested {depth} deep; at most {MAX_DEPTH} is allowed"
        raise ShapeError((LocatedFault("too-deep", text, ""),))
    if names != sum(1 for colon in _STRING.findall(body) if colon):
        raise ShapeError(tuple(_duplicates(body)))
    return document


def _survey(document: Any) -> tuple[int, int]:
    """Return how many members the document has, and how deep it nests."""
    names, depth, level = 0, 0, [document]
    while level:
        depth += 1
        inner: list[Any] = []
        for value in level:
            if type(value) is dict:
                names += len(value)
                inner.extend(value.values())
            elif type(value) is list:
                inner.extend(value)
        level = [value for value in inner if type(value) in (dict, list)]
    return names, depth


class _Repeats(dict[str, Any]):
    """An object that remembers which of its names came more than once."""

    repeated: frozenset[str] = frozenset()


def _object(pairs: list[tuple[str, Any]]) -> _Repeats:
    made = _Repeats(pairs)
    if len(made) != len(pairs):
        names = [name for name, _ in pairs]
        made.repeated = frozenset(name for name in made if names.count(name) > 1)
    return made


def _duplicates(body: bytes) -> list[LocatedFault]:
    document = json.loads(body, object_pairs_hook=_object)
    found, stack = [], [("", document)]
    while stack:
        pointer, value = stack.pop()
        if isinstance(value, _Repeats):
            for name in sorted(value.repeated):
                text = f"the name {name[:80]!r} stands twice in one object; say it once"
                found.append(LocatedFault("duplicate-name", text, child(pointer, name)))
            stack.extend((child(pointer, name), inner) for name, inner in value.items())
        elif isinstance(value, list):
            stack.extend((child(pointer, i), inner) for i, inner in enumerate(value))
    return sorted(found, key=lambda fault: fault.place)
