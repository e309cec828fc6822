"""The application: routes, problem details, log."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

from flask import Flask, Response

from service import (
    conversion,
    equilibrium,
    information,
    logs,
    operating_point,
    problem_details,
    rating,
    stoichiometric_table,
    volume,
)

if TYPE_CHECKING:
    from _typeshed.wsgi import StartResponse, WSGIEnvironment

MAX_BODY = 16 * 2**20
"""Bytes; a larger body is refused with 413."""


class _Service(Flask):
    def wsgi_app(self, environ: WSGIEnvironment, start_response: StartResponse) -> Iterable[bytes]:
        # An address without a path means the root (RFC 9110, 4.2.3); no page says so.
        environ["PATH_INFO"] = environ["PATH_INFO"] or "/"
        return super().wsgi_app(environ, start_response)

    def log_exception(self, exc_info: Any) -> None:
        # The framework's own line would quote the path.
        self.logger.error("unhandled", exc_info=exc_info)


def create_app(max_body: int = MAX_BODY, *, logged: bool = True) -> Flask:
    """Return the application, ready to serve.

    Parameters
    ----------
    max_body : int
        Largest request body read, bytes.
    logged : bool
        Whether each request is a line of the log.
    """
    app = _Service("molwright", static_folder=None)
    app.config["MAX_CONTENT_LENGTH"] = max_body
    app.url_map.strict_slashes = True
    app.url_map.merge_slashes = False
    for module in (
        information,
        stoichiometric_table,
        conversion,
        volume,
        rating,
        operating_point,
        equilibrium,
    ):
        app.register_blueprint(module.blueprint)
    problem_details.register(app)

    @app.after_request
    def _harden(response: Response) -> Response:
        response.headers["X-Content-Type-Options"] = "nosniff"
        return response

    if logged:
        logs.log_requests(app)
    return app
