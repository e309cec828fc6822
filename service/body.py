"""The request's body: read strictly, before anything is made of it."""

from __future__ import annotations

import codecs
import json
import re
from collections.abc import Iterator
from functools import lru_cache
from typing import IO, Any

import orjson
from flask import Request, current_app
from werkzeug.exceptions import ClientDisconnected, RequestEntityTooLarge
from werkzeug.http import parse_options_header
from werkzeug.wsgi import get_content_length

from schemas.shape import LocatedFault, ShapeError, child
from service.problem_details import HttpFault

MAX_DEPTH = 32
JSON = "application/json"

# A string of the text, and the colon behind it where it is a member's name.
_STRING = re.compile(rb'"[^"\\]*(?:\\.[^"\\]*)*"(\s*:)?')
_APART = re.compile(rb'"\s+:')


def read_json(request: Request) -> tuple[Any, bytes]:
    """Return the parsed JSON body, and the body itself.

    Raises
    ------
    HttpFault
        The body is not declared as JSON in UTF-8 (415) or is too large (413).
    ShapeError
        It is not JSON, nests too deep, or names a member twice.
    """
    environ = request.environ
    if not _declares_json(environ.get("CONTENT_TYPE", "")):
        found = request.headers.get("Content-Type")
        said = "no Content-Type" if found is None else f"Content-Type: {found[:80]}"
        raise HttpFault(
            415,
            "unsupported-media-type",
            f"found {said}; send JSON in UTF-8, with the header 'Content-Type: {JSON}'",
            header="Content-Type",
        )
    coding = environ.get("HTTP_CONTENT_ENCODING", "")
    if coding and coding.lower() != "identity":
        raise HttpFault(
            415,
            "unsupported-media-type",
            f"found Content-Encoding: {coding[:80]}; send the body as it is, without that header",
            header="Content-Encoding",
        )
    body = _body(request)
    return parse_json(body), body


@lru_cache(maxsize=64)  # nearly every client sends the same one
def _declares_json(content_type: str) -> bool:
    media, options = parse_options_header(content_type)
    return media.lower() == JSON and options.get("charset", "utf-8").lower() in ("utf-8", "utf8")


def _body(request: Request) -> bytes:
    limit = current_app.config["MAX_CONTENT_LENGTH"]
    environ = request.environ
    declared = get_content_length(environ)
    if declared is not None and declared <= limit:
        return _declared_body(environ["wsgi.input"], declared)
    try:
        body = request.get_data(cache=False)
        # Reading stops at the limit without a word; what goes on behind it raises here.
        request.stream.read(1)
    except RequestEntityTooLarge:
        raise HttpFault(
            413,
            "body-too-large",
            f"the body is larger than {limit} bytes, the most that this service reads; send less"
            " at a time, or raise --max-body",
            header="Content-Length",
        ) from None
    return body


def _declared_body(stream: IO[bytes], declared: int) -> bytes:
    # The framework's own reading, made for bodies of any kind, costs as much as Flask's routing.
    parts, left = [], declared
    try:
        while left and (part := stream.read(left)):
            parts.append(part)
            left -= len(part)
    except (OSError, ValueError) as error:
        raise ClientDisconnected from error
    if left:
        # The server hands over what came before the client broke off; it may even parse.
        raise HttpFault(
            400,
            "malformed-http",
            f"the body ends after {declared - left} of the {declared} bytes declared; send all of"
            " them",
            header="Content-Length",
        )
    return b"".join(parts)


def parse_json(body: bytes) -> Any:
    """Return the document in ``body``, read strictly: see :func:`read_json`."""
    try:
        document = orjson.loads(body)
    except orjson.JSONDecodeError as error:
        raise ShapeError((LocatedFault("not-json", _why_not_json(body, error), ""),)) from None
    depth = _depth(document) if body.count(b"{") + body.count(b"[") > MAX_DEPTH else 0
    if depth > MAX_DEPTH:
        text = f"found a document nested {depth} deep; at most {MAX_DEPTH} is allowed"
        raise ShapeError((LocatedFault("too-deep", text, ""),))
    if not _plainly_without_repeats(body, document) and _members(document) != _names(body):
        raise ShapeError(tuple(_duplicates(body)))
    return document


def _why_not_json(body: bytes, error: orjson.JSONDecodeError) -> str:
    if body.startswith((codecs.BOM_UTF8, codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        return "found a byte order mark; send the JSON document in UTF-8, without such a mark"
    where = f"line {error.lineno} column {error.colno}"
    found = f"{error.msg} at {where}" if body.strip() else "an empty body"
    return f"found {found}; a JSON document is needed (RFC 8259)"


def _plainly_without_repeats(body: bytes, document: Any) -> bool:
    """Whether it shows at a glance that no object of the document names a member twice.

    Of a text without escapes, written out again, every string comes out as it
    went in. So it has as many colons behind quotation marks as before, unless
    a name that came again took the place of the first.
    """
    return (
        b"\\" not in body
        and _APART.search(body) is None
        and body.count(b'":') == orjson.dumps(document).count(b'":')
    )


def _names(body: bytes) -> int:
    """Return how many names of members stand in the text."""
    return sum(1 for colon in _STRING.findall(body) if colon)


def _levels(document: Any) -> Iterator[list[Any]]:
    """Yield the objects and arrays of the document, level by level."""
    level = [document] if type(document) in (dict, list) else []
    while level:
        yield level
        inner: list[Any] = []
        for value in level:
            inner.extend(value.values() if type(value) is dict else value)
        level = [value for value in inner if type(value) in (dict, list)]


def _depth(document: Any) -> int:
    return sum(1 for _ in _levels(document))


def _members(document: Any) -> int:
    """Return how many members the objects of the document have."""
    levels = _levels(document)
    return sum(len(value) for level in levels for value in level if type(value) is dict)


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
