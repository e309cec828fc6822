"""What the service says of itself: its routes, its contract, its problems, its health."""

from __future__ import annotations

import html

from flask import Blueprint, Response, request

from core.problems import CATALOGUE
from schemas.contract import OPERATIONS, published_text
from schemas.examples import paste
from service import __version__
from service.endpoint import HTML, JSON, json_response, negotiate, pretty_asked
from service.problem_details import HttpFault
from service.statuses import STATUSES

blueprint = Blueprint("information", __name__)


@blueprint.get("/", provide_automatic_options=False)
def index() -> Response:
    """List the routes, and one request to paste."""
    negotiate(JSON)
    return json_response(
        {
            "service": "Molwright",
            "purpose": "the mole account of a plant's reactors",
            "release": __version__,
            "routes": [
                {"method": op.method, "path": op.path, "answers": op.summary} for op in OPERATIONS
            ],
            "try": paste(request.host_url.rstrip("/"), most=1),
            "cautions": "Results are advisory: screening calculations, not to be wired to safety"
            " functions. Follow local codes and licensed practice.",
        },
        pretty=pretty_asked(),
    )


@blueprint.get("/v1/openapi.json", provide_automatic_options=False)
def contract() -> Response:
    """Return the OpenAPI document, as published with this release."""
    negotiate(JSON)
    pretty_asked()
    return Response(published_text(), 200, content_type=JSON)


@blueprint.get("/problems/<code>", provide_automatic_options=False)
def explain(code: str) -> Response:
    """Explain a problem code, as JSON or as a page."""
    pretty = pretty_asked()
    media = negotiate(JSON, HTML)
    entry = CATALOGUE.get(code)
    if entry is None:
        raise HttpFault(
            404,
            "no-such-route",
            f"no problem is called {code[:80]!r}; a problem's 'type' says its page",
        )
    status = STATUSES[code]
    if media == JSON:
        page = {"code": code, "status": status, "title": entry.title, "text": entry.text}
        return json_response(page, pretty=pretty)
    response = Response(_page(code, status, entry.title, entry.text), 200, mimetype=HTML)
    response.headers["Content-Security-Policy"] = "default-src 'none'; style-src 'unsafe-inline'"
    response.headers["Vary"] = "Accept"
    return response


def _page(code: str, status: int, title: str, text: str) -> str:
    return f"""<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<title>{html.escape(title)} - Molwright</title>
<style>
body {{ font: 1rem/1.5 system-ui, sans-serif; color: #1b1f23; background: #fff;
  max-width: 42rem; margin: 3rem auto; padding: 0 1rem; }}
code {{ background: #eef1f4; padding: .1em .3em; border-radius: .2em; }}
</style>
</head>
<body>
<main>
<h1>{html.escape(title)}</h1>
<p><code>{html.escape(code)}</code>, answered with HTTP status {status}</p>
<p>{html.escape(text)}</p>
</main>
</body>
</html>
"""


@blueprint.get("/healthz", provide_automatic_options=False)
def health() -> Response:
    """Say that the process is alive."""
    return json_response({"status": "alive"})


@blueprint.get("/readyz", provide_automatic_options=False)
def ready() -> Response:
    """Say that the process can compute: everything it needs is loaded before it listens."""
    return json_response({"status": "ready", "release": __version__})
