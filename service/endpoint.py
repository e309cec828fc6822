"""What every calculating route shares: read the body, compute, answer in the form asked for."""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache
from typing import Any

import orjson
from flask import Blueprint, Request, Response, request
from werkzeug.datastructures import MIMEAccept
from werkzeug.http import parse_accept_header

from schemas.answer import Answer
from schemas.contract import Operation
from service import __version__, logs, pages
from service.body import read_json
from service.digest import digest
from service.problem_details import HttpFault
from service.tables import to_csv

CSV = "text/csv"
JSON = "application/json"
HTML = "text/html"


def calculation(
    blueprint: Blueprint, operation: Operation
) -> Callable[[Callable[[Any], Answer]], Callable[[Any], Answer]]:
    """Serve a function from a JSON document to an :class:`Answer` as the operation's route."""

    def serve(answer: Callable[[Any], Answer]) -> Callable[[Any], Answer]:
        def view() -> Response:
            # Itself, not Flask's stand-in for it, which looks it up anew for each attribute.
            asked = request._get_current_object()  # type: ignore[attr-defined]
            media = negotiate(*operation.media_types, asked=asked)
            pretty = pretty_asked(asked)
            document, body = read_json(asked)
            name, of = digest(document, body)
            logs.annotate(asked, digest=name)
            answered = answer(document)
            if media == CSV and answered.table is not None:
                response = _respond(to_csv(answered.table()).encode(), f"{CSV}; charset=utf-8")
                # What the provenance of a JSON answer holds.
                response.headers["Molwright-Request-Digest"] = name
                response.headers["Molwright-Release"] = __version__
                return response
            told = answered.document(__version__, name, of)
            if media == HTML and answered.page is not None:
                page = pages.answer_page(answered, answered.page(), told["provenance"])
                return pages.respond(page)
            return json_response(told, pretty=pretty)

        blueprint.add_url_rule(
            operation.path, operation.name, view, methods=["POST"], provide_automatic_options=False
        )
        return answer

    return serve


def _respond(body: bytes, content_type: str) -> Response:
    response = Response(body, 200, content_type=content_type)
    response.headers["Vary"] = "Accept"
    return response


def json_response(document: Any, *, pretty: bool = False) -> Response:
    """Return a JSON document as a response that ends in a newline."""
    option = orjson.OPT_APPEND_NEWLINE | (orjson.OPT_INDENT_2 if pretty else 0)
    return _respond(orjson.dumps(document, option=option), JSON)


def negotiate(*offered: str, asked: Request = request) -> str:
    """Return the media type to answer in; the first offered where the client does not mind.

    Raises
    ------
    HttpFault
        406, when nothing offered is accepted.
    """
    accept = asked.environ.get("HTTP_ACCEPT")
    chosen = _best(accept, offered) if accept else offered[0]
    if chosen is None:
        raise HttpFault(
            406,
            "not-acceptable",
            f"found Accept: {str(asked.accept_mimetypes)[:80]}; this route answers"
            f" {' or '.join(offered)}",
            header="Accept",
        )
    return chosen


@lru_cache(maxsize=256)  # a client sends the same header with every request
def _best(accept: str, offered: tuple[str, ...]) -> str | None:
    accepted = parse_accept_header(accept, MIMEAccept)
    if not accepted.provided:
        return offered[0]
    # Each form is offered in one version and one character set: no parameter chooses among them.
    plain = MIMEAccept([(media.partition(";")[0].rstrip(), q) for media, q in accepted])
    return plain.best_match(offered)


def refuse_parameters(*known: str) -> None:
    """Refuse query parameters other than those ``known``.

    Raises
    ------
    HttpFault
        400, for a parameter that the route does not know.
    """
    if not request.query_string:
        return
    allowed = f"allowed: {', '.join(known)}" if known else "this route takes none"
    for name in request.args:
        if name not in known:
            raise HttpFault(
                400,
                "unknown-parameter",
                f"no query parameter {name[:80]!r} is known; {allowed}",
                parameter=name[:80],
            )


def pretty_asked(asked: Request = request) -> bool:
    """Return whether ``?pretty=1`` was asked for; other parameters are refused.

    Raises
    ------
    HttpFault
        400, for a parameter that the route does not know.
    """
    if not asked.query_string:
        return False
    refuse_parameters("pretty")
    pretty = asked.args.getlist("pretty")
    if any(value not in ("0", "1") for value in pretty) or len(pretty) > 1:
        raise HttpFault(
            400,
            "unknown-parameter",
            f"found pretty={pretty[0][:80]!r}; allowed: pretty=1 or pretty=0, once",
            parameter="pretty",
        )
    return pretty == ["1"]
