"""What the service says of itself."""

import re

import pytest
from openapi_spec_validator import validate

from core.problems import CATALOGUE
from schemas.contract import OPERATIONS, openapi_document, published_text, render
from service.statuses import STATUSES
from tests.support import assert_refused


def test_the_index_lists_every_route_and_one_request_to_paste(client):
    document = client.get("/").get_json()
    assert [(r["method"], r["path"]) for r in document["routes"]] == [
        (op.method, op.path) for op in OPERATIONS
    ]
    assert document["try"].count("curl") == 1
    assert "http://localhost/v1/stoichiometric-table" in document["try"]


def test_the_contract_and_the_application_know_the_same_routes(app):
    served = {
        (method, re.sub(r"<(\w+)>", r"{\1}", rule.rule))
        for rule in app.url_map.iter_rules()
        for method in rule.methods - {"HEAD", "OPTIONS"}
    }
    assert served == {(op.method, op.path) for op in OPERATIONS}


def test_the_packaged_contract_is_that_of_the_schemas_and_valid_openapi(client):
    document = openapi_document()
    assert published_text() == render(document), "run 'molwright contract --write'"
    assert document["openapi"] == "3.1.0"
    validate(document)
    assert client.get("/v1/openapi.json").get_json() == document


@pytest.mark.parametrize("code", sorted(CATALOGUE))
def test_every_problem_has_a_page(client, code):
    said = client.get(f"/problems/{code}").get_json()
    entry = CATALOGUE[code]
    assert said == {
        "code": code,
        "status": STATUSES[code],
        "title": entry.title,
        "text": entry.text,
    }
    page = client.get(f"/problems/{code}", headers={"Accept": "text/html"})
    assert page.mimetype == "text/html"
    assert "<h1>" in page.get_data(as_text=True)
    assert "default-src 'none'" in page.headers["Content-Security-Policy"]


def test_an_unknown_problem_is_not_found(client):
    assert client.get("/problems/none-such").status_code == 404
    assert_refused(client.get("/problems/not-json?x=1"), 400, "unknown-parameter", "x")


def test_health_and_readiness(client):
    assert client.get("/healthz").get_json() == {"status": "alive"}
    assert client.get("/readyz").get_json()["status"] == "ready"


def test_codes_read_as_words():
    for code, entry in CATALOGUE.items():
        assert re.fullmatch(r"[a-z]+(-[a-z]+)*", code)
        assert entry.title
        assert entry.text.endswith(".")
