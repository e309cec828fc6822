"""A whole request, from bytes to bytes, over a bare route of the same framework.

Both are called as a WSGI server calls them, with the environment made beforehand. The request
is a stoichiometric table of a shift converter's feed at one conversion: reading, checking,
computing, writing, digest and log line included.
"""

from __future__ import annotations

import contextlib
import io
import os
from collections.abc import Callable, Iterator

import flask
import orjson
from werkzeug.test import EnvironBuilder

from schemas.examples import EXAMPLES
from service.app import create_app
from tests.benchmark._interleave import medians

ROUTE = "/v1/stoichiometric-table"
REQUEST = next(example.request for example in EXAMPLES if example.name == "high-temperature-shift")
GOAL = 6.0


def run() -> list[tuple[str, float, float, str]]:
    """Return the ratio of the CPU times."""
    bare = flask.Flask("bare")
    fixed = b"x" * 1900

    @bare.post(ROUTE)
    def _() -> flask.Response:
        return flask.Response(fixed, mimetype="application/json")

    body = orjson.dumps(REQUEST)
    with log_discarded():
        whole, floor = medians(asking(create_app(), body), asking(bare, body), calls=200)
    return [("stoichiometric table over a bare route", whole / floor, GOAL, "max")]


def asking(app: flask.Flask, body: bytes) -> Callable[[], None]:
    """Return a function that has ``app`` answer the request once."""
    environ = EnvironBuilder(
        path=ROUTE, method="POST", data=body, content_type="application/json"
    ).get_environ()

    def start(status: str, _headers: object, _exc_info: object = None) -> Callable[[bytes], None]:
        assert status == "200 OK", status
        return lambda _: None

    def ask() -> None:
        answer = app({**environ, "wsgi.input": io.BytesIO(body)}, start)
        assert b"".join(answer)
        answer.close()  # type: ignore[attr-defined]

    return ask


@contextlib.contextmanager
def log_discarded() -> Iterator[None]:
    """Send the descriptor that the log is written to nowhere, for a while."""
    kept = os.dup(1)
    with open(os.devnull, "wb") as nowhere:
        os.dup2(nowhere.fileno(), 1)
    try:
        yield
    finally:
        os.dup2(kept, 1)
        os.close(kept)
