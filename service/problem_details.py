"""Problem details (RFC 9457): the one shape of every answer that is a refusal."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import orjson
from flask import Flask, Response, request
from werkzeug.exceptions import HTTPException

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


HTTP_CODES = {
    404: "no-such-route",
    405: "method-not-allowed",
    413: "body-too-large",
}


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
    count = "" if len(faults) == 1 else f" and {len(faults) - 1} more under 'errors'"
    return problem(400 if shape else 422, code, f"{faults[0].detail}{count}", faults)


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

    @app.errorhandler(HTTPException)
    def _(error: HTTPException) -> Response:
        status = error.code or 500
        code = HTTP_CODES.get(status)
        if code is None:
            app.logger.error("no problem document for status %s", status)
            return problem(500, "internal-error", INTERNAL)
        response = problem(status, code, _http_detail(status, error))
        allowed = getattr(error, "valid_methods", None)
        if allowed:
            response.headers["Allow"] = ", ".join(sorted(allowed))
        return response

    @app.errorhandler(Exception)
    def _(error: Exception) -> Response:
        app.logger.error("unhandled", exc_info=error)
        return problem(500, "internal-error", INTERNAL)


INTERNAL = (
    "the service failed in a way that it should not; the same request will fail again. Report the"
    " request and the X-Request-ID header of this answer."
)


def _http_detail(status: int, error: HTTPException) -> str:
    if status == 404:
        return f"no route {request.path[:200]!r} is known; 'GET /' lists the routes"
    if status == 405:
        allowed = ", ".join(sorted(getattr(error, "valid_methods", None) or ()))
        return f"found {request.method}; this route takes {allowed}"
    return "the body is larger than this service reads"
