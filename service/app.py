"""The application: routes, problem details, log."""

from __future__ import annotations

from flask import Flask, Response

from service import conversion, information, logs, problem_details, stoichiometric_table, volume

MAX_BODY = 16 * 2**20
"""Bytes; a larger body is refused with 413."""


def create_app(max_body: int = MAX_BODY) -> Flask:
    """Return the application, ready to serve.

    Parameters
    ----------
    max_body : int
        Largest request body read, bytes.
    """
    app = Flask("molwright", static_folder=None)
    app.config["MAX_CONTENT_LENGTH"] = max_body
    app.url_map.strict_slashes = True
    app.url_map.merge_slashes = False
    for module in (information, stoichiometric_table, conversion, volume):
        app.register_blueprint(module.blueprint)
    problem_details.register(app)

    @app.after_request
    def _harden(response: Response) -> Response:
        response.headers["X-Content-Type-Options"] = "nosniff"
        return response

    logs.log_requests(app)
    return app
