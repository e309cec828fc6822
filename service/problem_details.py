"""Problem details (RFC 9457): the one shape of every answer that is a refusal."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import orjson
from flask import Flask, Response, request
from werkzeug.exceptions import BadRequest, MethodNotAllowed, NotFound

from core.problems import CATALOGUE
from schemas.shape import LocatedFault, MeaningError, RequestError, ShapeError
from service import logs

PROBLEM_JSON = "application/problem+json"
MAX_ERRORS = 100


class HttpFault(Exception):  # noqa: N818 - a fault of the request as HTTP, not of this program
    """A request that HTTP itself lets us refuse, with the header at fault."""

    def __init__(
        self, status: int, code: str, detail: str, header: str = "", parameter: str = ""
    ) -> None:
        super().__init__(status, code, detail)
        self.status, self.code, self.detail = status, code, detail
        self.fault: LocatedFault | None = None
        if header:
            self.fault = LocatedFault(code, detail, header, "header")
        elif parameter:
            self.fault = LocatedFault(code, detail, parameter, "parameter")


def problem(status: int, code: str, detail: str, faults: Sequence[LocatedFault] = ()) -> Response:
    """Return a problem document as a response."""
    logs.annotate(code=code)
    document: dict[str, Any] = {
        "type": f"/problems/{code}",
        "title": CATALOGUE[code].title,
        "status": status,
        "detail": detail,
        "instance": request.path,
        "errors": [
            {"code": fault.code, "detail": fault.detail, fault.locator: fault.place}
            for fault in faults[:MAX_ERRORS]
        ],
    }
    if faults:
        document["errors_total"] = len(faults)
    response = Response(
        orjson.dumps(document, option=orjson.OPT_APPEND_NEWLINE), status, mimetype=PROBLEM_JSON
    )
    response.headers["Cache-Control"] = "no-store"
    return response


def refused(error: RequestError) -> Response:
    """Answer a request whose document cannot be read or computed."""
    shape = isinstance(error, ShapeError)
    faults = error.faults
    codes = {fault.code for fault in faults}
    several = "document-breaks-schema" if shape else "cannot-be-computed"
    code = codes.pop() if len(codes) == 1 else several
    detail = faults[0].detail
    if len(faults) > 1:
        detail = f"{detail.rstrip('.')}; and {len(faults) - 1} more under 'errors'"
    return problem(400 if shape else 422, code, detail, faults)


def register(app: Flask) -> None:
    """Make every failure of the app answer with a problem document."""

    @app.errorhandler(ShapeError)
    @app.errorhandler(MeaningError)
    def _(error: RequestError) -> Response:
        return refused(error)

    @app.errorhandler(HttpFault)
    def _(error: HttpFault) -> Response:
        faults = () if error.fault is None else (error.fault,)
        return problem(error.status, error.code, error.detail, faults)

    @app.errorhandler(NotFound)
    def _(_error: NotFound) -> Response:
        detail = f"no route {request.path[:200]!r} is known; 'GET /' lists the routes"
        return problem(404, "no-such-route", detail)

    @app.errorhandler(MethodNotAllowed)
    def _(error: MethodNotAllowed) -> Response:
        methods = sorted(error.valid_methods or ())
        allowed = ", ".join(methods)
        logs.annotate(route=_rule(app, methods[0]))
        detail = f"found {request.method}; this route takes {allowed}"
        response = problem(405, "method-not-allowed", detail)
        response.headers["Allow"] = allowed
        return response

    @app.errorhandler(BadRequest)
    def _(_error: BadRequest) -> Response:
        return problem(400, "malformed-http", MALFORMED)

    @app.errorhandler(Exception)
    def _(error: Exception) -> Response:
        app.logger.error("unhandled", exc_info=error)
        return problem(500, "internal-error", INTERNAL)


MALFORMED = (
    "found something other than a well-formed HTTP/1.1 request (RFC 9112): its request line, its"
    " header or the framing of its body; look at what the client, or a proxy on the way, sends."
    " HTTPS sent to a plain HTTP port looks like this too"
)
INTERNAL = (
    "the service failed in a way that it should not; the same request will fail again. Report the"
    " request and the X-Request-ID header of this answer."
)


def _rule(app: Flask, method: str) -> str:
    """Return the rule that the request's path matches with another method."""
    urls = app.create_url_adapter(request)
    assert urls is not None  # a request has one
    rule, _ = urls.match(method=method, return_rule=True)
    return rule.rule
