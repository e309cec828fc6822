"""What the service says of itself."""

import html
import json
import re

import pytest
from openapi_spec_validator import validate
from werkzeug.test import create_environ, run_wsgi_app

from core.notes import NOTES
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


@pytest.mark.parametrize("host", ["plant.example:8410", "127.0.0.1:8410", "[::1]:8410", "a-b"])
def test_the_request_to_paste_names_the_host_that_the_client_used(client, host):
    said = client.get("/", headers={"Host": host}).get_json()["try"]
    assert f"'http://{host}/v1/" in said


@pytest.mark.parametrize("host", [None, "", "a'; rm -r b #", "a b", "a/b", "<b>", "ü"])
def test_a_host_that_no_shell_should_see_is_not_repeated(app, host):
    environ = create_environ() | {"SERVER_PORT": "8410", "HTTP_HOST": host}
    if host is None:
        del environ["HTTP_HOST"]
    body, status, _ = run_wsgi_app(app, environ)
    assert status == "200 OK"
    assert "'http://127.0.0.1:8410/v1/" in json.loads(b"".join(body))["try"]


def test_a_host_that_cannot_be_is_refused(client):
    response = client.get("/", environ_overrides={"HTTP_HOST": "a" * 256})
    assert response.status_code == 400
    assert response.get_json()["type"] == "/problems/malformed-http"


def test_an_address_without_a_path_is_the_root(client):
    response = client.get("/", environ_overrides={"PATH_INFO": ""})
    assert response.status_code == 200
    assert response.get_json()["service"] == "Molwright"


GETS = [op.path for op in OPERATIONS if op.method == "GET"]


@pytest.mark.parametrize("path", [path.replace("{code}", "not-json") for path in GETS])
def test_no_route_ignores_a_parameter(client, path):
    response = client.get(f"{path}?x=1")
    fault = assert_refused(response, 400, "unknown-parameter", "x")
    assert "'x'" in fault["detail"]


def test_the_contract_is_served_as_it_is_published_or_not_at_all(client):
    whole = client.get("/v1/openapi.json")
    assert whole.get_data() == published_text()
    tag = whole.headers["ETag"]
    assert whole.headers["Cache-Control"] == "no-cache"
    for known in (tag, f"W/{tag}", f'"other", {tag}', "*"):
        answer = client.get("/v1/openapi.json", headers={"If-None-Match": known})
        assert (answer.status_code, answer.get_data()) == (304, b"")
        assert answer.headers["ETag"] == tag
        assert "Content-Type" not in answer.headers
    other = client.get("/v1/openapi.json", headers={"If-None-Match": '"other"'})
    assert other.status_code == 200
    # It is indented as it is: what is read here has the digest that a reviewer saw.
    refused = client.get("/v1/openapi.json?pretty=1")
    assert_refused(refused, 400, "unknown-parameter", "pretty")


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
    said.pop("as_note", None)
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


@pytest.mark.parametrize("code", sorted(NOTES))
def test_every_note_has_a_page(client, code):
    said = client.get(f"/problems/{code}").get_json()
    entry = NOTES[code]
    told = {"title": entry.title, "text": entry.text}
    # Some codes refuse in one place and remark in another: then one page tells both.
    assert said.pop("as_note", None) == (told if code in CATALOGUE else None)
    if code not in CATALOGUE:
        assert said == {"code": code, **told}
    page = client.get(f"/problems/{code}", headers={"Accept": "text/html"}).get_data(as_text=True)
    assert f"<p>{entry.text}</p>" in html.unescape(page)
    assert "a note in answers" in page
    assert ("HTTP status" in page) == (code in CATALOGUE)


def test_problems_and_notes_are_listed(client):
    document = client.get("/problems").get_json()
    assert document["problems"] == [
        {"code": code, "status": STATUSES[code], "title": entry.title}
        for code, entry in CATALOGUE.items()
    ]
    assert document["notes"] == [
        {"code": code, "title": entry.title} for code, entry in NOTES.items()
    ]


def test_an_unknown_problem_is_not_found(client):
    response = client.get("/problems/none-such")
    assert response.status_code == 404
    assert "'GET /problems'" in response.get_json()["detail"]


def test_health_and_readiness(client):
    alive, ready = client.get("/healthz"), client.get("/readyz")
    assert alive.get_json() == {"status": "alive"}
    assert ready.get_json()["status"] == "ready"
    assert alive.headers["Cache-Control"] == ready.headers["Cache-Control"] == "no-store"


def test_codes_read_as_words():
    for code, entry in CATALOGUE.items():
        assert re.fullmatch(r"[a-z]+(-[a-z]+)*", code)
        assert entry.title
        assert entry.text.endswith(".")
