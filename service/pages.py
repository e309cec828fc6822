"""Answers as pages: one self-contained document each, without scripts and without the internet."""

from __future__ import annotations

import base64
from functools import cache
from pathlib import Path
from typing import Any

from flask import Response
from jinja2 import Environment, FileSystemLoader, StrictUndefined

from schemas.answer import Answer
from schemas.edge import Json
from schemas.page import Page, cell, told
from service import drawing

POLICY = "default-src 'none'; img-src data:; style-src 'unsafe-inline'; base-uri 'none'"
"""Of what a page may load: nothing but what it holds itself."""
SEVERITIES = {"caution": "Caution", "warning": "Warning", "info": "Note"}
STANDINGS = {"fine": "\u2713 Fine.", "attention": "\u25b2 To act on.", "bad": "\u2715 Bad data."}
"""In words and by a sign, so that no reader hangs on colours."""


@cache
def _templates() -> Environment:
    environment = Environment(
        loader=FileSystemLoader(Path(__file__).parent / "templates"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters.update(told=told, cell=cell, interval=interval)
    environment.globals["zip"] = zip
    return environment


def render(template: str, **members: Any) -> str:
    """Return a page made from a template."""
    return _templates().get_template(template).render(**members)


def respond(page: str) -> Response:
    """Return a page as a response."""
    response = Response(page, 200, content_type="text/html; charset=utf-8")
    response.headers["Content-Security-Policy"] = POLICY
    response.headers["Vary"] = "Accept"
    return response


def answer_page(answer: Answer, page: Page, provenance: Json) -> str:
    """Return the page of an answer."""
    notes = sorted(
        (*answer.notes, *page.notes), key=lambda note: list(SEVERITIES).index(note["severity"])
    )
    return render(
        "answer.html",
        page=page,
        pictures=[_picture(drawing.svg(plot)) for plot in page.plots],
        notes=notes,
        assumed=answer.assumed,
        severities=SEVERITIES,
        standings=STANDINGS,
        provenance=provenance,
    )


def _picture(svg: str) -> str:
    """Return a drawing as an address that holds it, so that its names cannot clash with others."""
    return "data:image/svg+xml;base64," + base64.b64encode(svg.encode()).decode()


def interval(number: Json | None) -> str:
    """Return the coverage interval of a number in words; empty without one."""
    if number is None or "interval" not in number:
        return ""
    low, high = number["interval"]
    return f"{cell(low)} to {cell(high)} ({100 * number['coverage']:.4g} %)"
