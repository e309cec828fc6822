"""What the service says of itself: its routes, its contract, its problems, its health."""

from __future__ import annotations

import hashlib
import re
from functools import cache
from typing import Any

from flask import Blueprint, Response, request

from core.notes import NOTES
from core.problems import CATALOGUE, Entry
from schemas.contract import OPERATIONS, published_text
from schemas.examples import paste
from service import __version__, pages
from service.endpoint import HTML, JSON, json_response, negotiate, pretty_asked, refuse_parameters
from service.problem_details import HttpFault
from service.statuses import STATUSES

blueprint = Blueprint("information", __name__)


@blueprint.get("/", provide_automatic_options=False)
def index() -> Response:
    """List the routes, and one request to paste."""
    negotiate(JSON)
    pretty = pretty_asked()
    return json_response(
        {
            "service": "Molwright",
            "purpose": "the mole account of a plant's reactors",
            "release": __version__,
            "routes": [
                {"method": op.method, "path": op.path, "answers": op.summary} for op in OPERATIONS
            ],
            "try": paste(f"http://{_host()}", most=1),
            "cautions": "Results are advisory: screening calculations, not to be wired to safety"
            " functions. Follow local codes and licensed practice.",
        },
        pretty=pretty,
    )


_HOST = re.compile(r"[A-Za-z0-9.:\[\]-]{1,255}")


def _host() -> str:
    """Return what the client calls this service, if a shell may be told so."""
    environ = request.environ
    said: str = environ.get("HTTP_HOST", "")
    return said if _HOST.fullmatch(said) else f"127.0.0.1:{environ['SERVER_PORT']}"


@blueprint.get("/v1/openapi.json", provide_automatic_options=False)
def contract() -> Response:
    """Return the OpenAPI document, as published with this release."""
    negotiate(JSON)
    refuse_parameters()
    tag = _contract_tag()
    if request.if_none_match.contains_weak(tag):
        response = Response(status=304)
    else:
        response = Response(published_text(), 200, content_type=JSON)
    response.set_etag(tag)
    response.headers["Cache-Control"] = "no-cache"
    return response


@cache
def _contract_tag() -> str:
    return hashlib.sha256(published_text()).hexdigest()[:32]


@blueprint.get("/problems", provide_automatic_options=False)
def problems() -> Response:
    """List the codes of problems, and those of notes in answers."""
    negotiate(JSON)
    pretty = pretty_asked()
    return json_response(
        {
            "problems": [
                {"code": code, "status": STATUSES[code], "title": entry.title}
                for code, entry in CATALOGUE.items()
            ],
            "notes": [{"code": code, "title": entry.title} for code, entry in NOTES.items()],
        },
        pretty=pretty,
    )


@blueprint.get("/problems/<code>", provide_automatic_options=False)
def explain(code: str) -> Response:
    """Explain the code of a problem or a note, as JSON or as a page; some codes are both."""
    media = negotiate(JSON, HTML)
    pretty = pretty_asked()
    problem, note = CATALOGUE.get(code), NOTES.get(code)
    if problem is None and note is None:
        raise HttpFault(
            404,
            "no-such-route",
            f"no problem or note is called {code[:80]!r}; 'GET /problems' lists them",
        )
    if media == HTML:
        return _page(code, problem, note)
    told: dict[str, Any] = {"code": code}
    if problem is not None:
        told |= {"status": STATUSES[code], **problem._asdict()}
        if note is not None:
            told["as_note"] = note._asdict()
    elif note is not None:
        told |= note._asdict()
    return json_response(told, pretty=pretty)


def _page(code: str, problem: Entry | None, note: Entry | None) -> Response:
    parts = []
    if problem is not None:
        parts.append((problem, f"answered with HTTP status {STATUSES[code]}"))
    if note is not None:
        parts.append((note, "a note in answers"))
    return pages.respond(pages.render("explanation.html", code=code, parts=parts))


@blueprint.get("/healthz", provide_automatic_options=False)
def health() -> Response:
    """Say that the process is alive."""
    refuse_parameters()
    return _now({"status": "alive"})


@blueprint.get("/readyz", provide_automatic_options=False)
def ready() -> Response:
    """Say that the process can compute: everything it needs is loaded before it listens."""
    refuse_parameters()
    return _now({"status": "ready", "release": __version__})


def _now(state: dict[str, str]) -> Response:
    response = json_response(state)
    response.headers["Cache-Control"] = "no-store"
    return response
