"""What comes in before anything is computed, and the forms that answers take."""

import csv
import gzip
import io
import json

import orjson
import pytest
import rfc8785
from flask.testing import FlaskClient
from hypothesis import given
from hypothesis import strategies as st

from schemas.shape import ShapeError
from service.body import MAX_DEPTH, parse_json
from service.digest import CANONICAL_LIMIT, digest
from tests.support import SHIFT, assert_refused, changed, post

TABLE = "/v1/stoichiometric-table"
JSON = {"Content-Type": "application/json"}


def send(client: FlaskClient, body: bytes, **headers: str):
    return client.post(TABLE, data=body, headers={**JSON, **headers})


@pytest.mark.parametrize(
    ("body", "code", "place"),
    [
        (b"", "not-json", ""),
        (b"{", "not-json", ""),
        (b'{"key": NaN}', "not-json", ""),
        (b'{"key": 1e999}', "not-json", ""),
        (b'{"key": "\\ud800"}', "not-json", ""),
        (b"\xff\xfe", "not-json", ""),
        (b"[" * 3000, "not-json", ""),
        (b"[" * 40 + b"]" * 40, "too-deep", ""),
        (b'{"a": {"b": 1, "b": 2}}', "duplicate-name", "/a/b"),
        (b'{"a": [{"x/y": 1, "x/y": 1}], "q\\"": ":"}', "duplicate-name", "/a/0/x~1y"),
        (b'{"k\\u0065y": 1, "key": 2}', "duplicate-name", "/key"),
        (b"[]", "wrong-type", ""),
        (b"null", "wrong-type", ""),
        (b'"text"', "wrong-type", ""),
    ],
)
def test_a_body_that_cannot_be_read_is_refused(client, body, code, place):
    response = send(client, body)
    assert_refused(response, 400, code, place)
    assert response.get_json()["type"] == f"/problems/{code}"


# Lone surrogates have no form in UTF-8, and so none in a JSON body.
TEXT = st.text(st.characters(exclude_categories=["Cs"]), max_size=8)


@given(
    st.recursive(
        st.none() | st.booleans() | st.integers(-(2**53), 2**53) | TEXT,
        lambda inner: st.lists(inner, max_size=4) | st.dictionaries(TEXT, inner),
        max_leaves=30,
    )
)
def test_whatever_is_json_without_repeats_is_read_as_it_stands(document):
    body = json.dumps(document, indent=1).encode()
    if _depth(document) > MAX_DEPTH:
        with pytest.raises(ShapeError, match="too-deep"):
            parse_json(body)
    else:
        assert parse_json(body) == document


def _depth(document) -> int:
    inner = document.values() if isinstance(document, dict) else document
    if not isinstance(document, dict | list):
        return 0
    return 1 + max(map(_depth, inner), default=0)


@pytest.mark.parametrize("sent", [None, "text/plain", "application/x-www-form-urlencoded"])
def test_a_body_not_declared_as_json_is_told_the_header_to_send(client, sent):
    headers = {} if sent is None else {"Content-Type": sent}
    response = client.post(TABLE, data=b"{}", headers=headers)
    fault = assert_refused(response, 415, "unsupported-media-type", "Content-Type")
    assert "'Content-Type: application/json'" in fault["detail"]


@pytest.mark.parametrize("charset", ["utf-8", "UTF-8", '"utf-8"', "utf8"])
def test_json_with_its_charset_is_json(client, charset):
    body = orjson.dumps(SHIFT)
    response = send(client, body, **{"Content-Type": f"application/json; charset={charset}"})
    assert response.status_code == 200


@pytest.mark.parametrize("charset", ["utf-16", "iso-8859-1", "latin1"])
def test_json_in_another_charset_is_refused(client, charset):
    body = orjson.dumps(SHIFT)
    response = send(client, body, **{"Content-Type": f"application/json; charset={charset}"})
    fault = assert_refused(response, 415, "unsupported-media-type", "Content-Type")
    assert charset in fault["detail"]
    assert "UTF-8" in fault["detail"]


@pytest.mark.parametrize("coding", ["gzip", "br", "gzip, identity"])
def test_a_coded_body_is_refused_by_the_header_that_says_so(client, coding):
    response = send(client, gzip.compress(orjson.dumps(SHIFT)), **{"Content-Encoding": coding})
    fault = assert_refused(response, 415, "unsupported-media-type", "Content-Encoding")
    assert coding in fault["detail"]


@pytest.mark.parametrize("coding", ["", "identity", "Identity"])
def test_a_body_that_is_said_not_to_be_coded_is_read(client, coding):
    assert send(client, orjson.dumps(SHIFT), **{"Content-Encoding": coding}).status_code == 200


@pytest.mark.parametrize("coding", ["utf-8-sig", "utf-16"])
def test_a_byte_order_mark_is_named(client, coding):
    response = send(client, json.dumps(SHIFT).encode(coding))
    fault = assert_refused(response, 400, "not-json", "")
    assert "UTF-8, without such a mark" in fault["detail"]


def test_a_body_beyond_the_limit_is_refused(client, app):
    body = b" " * (app.config["MAX_CONTENT_LENGTH"] + 1)
    fault = assert_refused(send(client, body), 413, "body-too-large", "Content-Length")
    assert "--max-body" in fault["detail"]


class Gone(io.BytesIO):
    def read(self, _size=-1):
        raise ConnectionResetError


def test_a_client_that_goes_away_is_no_failure_of_ours(client):
    server = {"wsgi.input": Gone(), "CONTENT_LENGTH": "9"}
    response = client.post(TABLE, headers=JSON, environ_overrides=server)
    assert response.status_code == 400
    assert response.get_json()["type"] == "/problems/malformed-http"


def test_no_accept_header_means_json_and_a_newline_at_the_end(client):
    response = send(client, orjson.dumps(SHIFT))
    assert response.mimetype == "application/json"
    assert response.get_data().endswith(b"}\n")
    assert response.headers["Vary"] == "Accept"
    assert response.headers["X-Content-Type-Options"] == "nosniff"


@pytest.mark.parametrize(
    ("accept", "media"),
    [
        ("application/json; charset=utf-8", "application/json"),
        ("application/json;version=1", "application/json"),
        ("application/json;version=1;q=0.2, text/csv;header=present;q=0.9", "text/csv"),
        ("text/csv; charset=utf-8", "text/csv"),
        ("TEXT/CSV", "text/csv"),
        ("text/*", "text/csv"),
        ("text/csv;q=0.9, application/json;q=0.5", "text/csv"),
        ("*/*", "application/json"),
        ("application/*", "application/json"),
        ("application/json;q=0, */*", "text/csv"),
        ("image/png, */*;q=0.1", "application/json"),
        ("", "application/json"),
    ],
)
def test_of_an_accept_header_only_the_preference_counts(client, accept, media):
    response = send(client, orjson.dumps(SHIFT), Accept=accept)
    assert (response.status_code, response.mimetype) == (200, media)


@pytest.mark.parametrize("accept", ["text/html;q=0.5", "*/*;q=0", "application/jsonp"])
def test_what_nobody_offers_is_not_acceptable(client, accept):
    assert_refused(send(client, b"{}", Accept=accept), 406, "not-acceptable", "Accept")


def test_what_the_route_does_not_offer_is_refused_in_problem_json_all_the_same(client):
    response = send(client, orjson.dumps(SHIFT), Accept="image/png")
    fault = assert_refused(response, 406, "not-acceptable", "Accept")
    assert "text/csv" in fault["detail"]


def test_pretty_indents_and_other_parameters_are_refused(client):
    plain = client.post(TABLE, json=SHIFT).get_data()
    pretty = client.post(f"{TABLE}?pretty=1", json=SHIFT).get_data()
    assert orjson.loads(plain) == orjson.loads(pretty)
    assert plain.count(b"\n") == 1 < pretty.count(b"\n")
    assert_refused(client.post(f"{TABLE}?prety=1", json=SHIFT), 400, "unknown-parameter", "prety")
    assert_refused(client.post(f"{TABLE}?pretty=2", json=SHIFT), 400, "unknown-parameter", "pretty")


def test_the_table_as_csv_holds_the_numbers_of_the_json(client):
    request = changed(SHIFT, conversions=[0.4, 0.8])
    answer = client.post(TABLE, json=request).get_json()["result"]
    response = client.post(TABLE, json=request, headers={"Accept": "text/csv"})
    assert response.content_type == "text/csv; charset=utf-8"
    provenance = client.post(TABLE, json=request).get_json()["provenance"]
    assert response.headers["Molwright-Request-Digest"] == provenance["digest"]
    assert response.headers["Molwright-Release"] == provenance["release"]
    rows = list(csv.DictReader(io.StringIO(response.get_data(as_text=True))))
    assert len(rows) == 2 * len(answer["species"])
    for row in rows:
        state = next(
            s for s in answer["states"] if s["conversion"]["value"] == float(row["conversion"])
        )
        out = state["outlet"]["species"][row["substance"]]
        assert float(row["outlet flow [kmol/h]"]) == pytest.approx(out["flow"]["value"], rel=1e-14)
        assert float(row["concentration [kmol/m3]"]) == pytest.approx(
            out["concentration"]["value"], rel=1e-14
        )
        theta = answer["species"][row["substance"]]["theta"]["value"]
        assert float(row["theta"]) == pytest.approx(theta)


def test_a_csv_cell_is_never_a_formula(client):
    name = '=HYPERLINK("x")'
    request = {
        "species": {name: {"molar_mass": "10 g/mol"}, "R": {"molar_mass": "10 g/mol"}},
        "reactions": [f"{name} -> R"],
        "key": name,
        "feed": {"phase": "gas", "flows": {name: "1 mol/s"}},
        "conversions": [0.5],
    }
    response = client.post(TABLE, json=request, headers={"Accept": "text/csv"})
    assert response.status_code == 200, response.get_data(as_text=True)
    rows = list(csv.DictReader(io.StringIO(response.get_data(as_text=True))))
    assert rows[0]["substance"] == f"'{name}"


def test_the_digest_is_that_of_the_canonical_form(client):
    one = send(client, orjson.dumps(SHIFT)).get_json()["provenance"]
    shuffled = json.dumps(dict(reversed(SHIFT.items())), indent=3).encode()
    other = send(client, shuffled).get_json()["provenance"]
    assert one == other
    assert one["digest_of"] == "canonical-json"
    assert one["digest"].startswith("sha256:")


def test_canonical_numbers_follow_the_standard():
    # RFC 8785, section 3.2.3 and appendix B: numbers as ECMAScript writes them.
    assert rfc8785.dumps({"b": 1.0, "a": [1e21, 1e-7, 333333333.3333333]}) == (
        b'{"a":[1e+21,1e-7,333333333.3333333],"b":1}'
    )


def test_a_large_body_is_digested_as_it_came():
    body = b"[" + b"1," * CANONICAL_LIMIT + b"1]"
    assert digest(orjson.loads(body), body)[1] == "body"
    assert digest([2**60], b"[1152921504606846976]")[1] == "body"


@pytest.mark.parametrize("method", ["GET", "PUT", "DELETE", "PATCH"])
def test_another_method_is_told_which_is_allowed(client, method):
    response = client.open(TABLE, method=method)
    assert response.headers["Allow"] == "POST"
    document = response.get_json()
    assert document["type"] == "/problems/method-not-allowed"
    assert response.status_code == 405
    assert response.mimetype == "application/problem+json"


@pytest.mark.parametrize(
    "path",
    ["/v1/nothing", "/v1/stoichiometric-table/", "/v1//conversion", "/problems/", "*", "/%"],
)
def test_an_unknown_path_is_a_problem_document(client, path):
    response = client.post(path, json={}, environ_overrides={"PATH_INFO": path})
    assert response.status_code == 404
    assert response.get_json()["type"] == "/problems/no-such-route"


def test_faults_of_several_kinds_are_told_together(client):
    request = changed(SHIFT, key=..., feed__phase="plasma", nonsense=1)
    response = post(client, "stoichiometric-table", request)
    assert response.get_json()["type"] == "/problems/document-breaks-schema"
    assert_refused(response, 400, "missing-field", "/key")
    assert_refused(response, 400, "not-a-choice", "/feed/phase")
    assert_refused(response, 400, "unknown-field", "/nonsense")


def test_a_detail_that_goes_on_has_no_full_stop_within(client):
    feed = {"phase": "gas", "flows": {"CO": "1 kmol/h", "O2": "2 kmoles/h"}}
    request = {"reactions": ["CO + O2 -> CO2"], "key": "CO", "feed": feed, "conversions": [0.5]}
    document = post(client, "stoichiometric-table", request).get_json()
    assert document["errors"][0]["detail"].endswith("2 CO2.")
    assert document["detail"].endswith("2 CO2; and 1 more under 'errors'")


def test_at_most_a_hundred_faults_are_listed_and_all_are_counted(client):
    request = changed(SHIFT, conversions=["no number"] * 150)
    document = post(client, "stoichiometric-table", request).get_json()
    assert len(document["errors"]) == 100
    assert document["errors_total"] == 150


def test_a_failure_of_ours_tells_nothing_of_itself(client, monkeypatch):
    from service import stoichiometric_table

    def fail(_document):
        raise RuntimeError("secret of /some/path")

    monkeypatch.setattr(stoichiometric_table.wire, "read", fail)
    response = client.post(TABLE, json=SHIFT)
    document = response.get_json()
    assert response.status_code == 500
    assert document["type"] == "/problems/internal-error"
    assert "secret" not in response.get_data(as_text=True)
    assert "Traceback" not in response.get_data(as_text=True)
