"""The calculations over HTTP: what a caller of the real server gets, held to the contract."""

import json

import pytest

from schemas.contract import operation
from schemas.examples import EXAMPLES, paste
from tests.support import answer_validator


@pytest.mark.parametrize("example", EXAMPLES, ids=lambda example: example.name)
def test_an_example_is_answered_over_http_as_the_contract_says(server, example):
    path = operation(example.operation).path
    body = json.dumps(example.request)
    answer = server.request("POST", path, body, {"Content-Type": "application/json"})
    assert answer.status == example.status
    document = answer.json()
    assert list(answer_validator(example.operation, answer.status).iter_errors(document)) == []
    if answer.status == 200:
        packaged = example.answer()
        assert document["provenance"] == packaged["provenance"]
        assert document["result"].keys() == packaged["result"].keys()


def test_the_same_request_gets_the_same_bytes_whichever_process_answers(server):
    example = next(e for e in EXAMPLES if e.operation == "conversion" and e.status == 200)
    body = json.dumps(example.request)
    path = operation(example.operation).path
    headers = {"Content-Type": "application/json"}
    assert len({server.request("POST", path, body, headers).body for _ in range(8)}) == 1


def test_a_table_comes_as_csv(server):
    example = next(e for e in EXAMPLES if e.name == "sulphur-dioxide-oxidation")
    headers = {"Content-Type": "application/json", "Accept": "text/csv"}
    path = operation(example.operation).path
    answer = server.request("POST", path, json.dumps(example.request), headers)
    assert answer.headers["Content-Type"] == "text/csv; charset=utf-8"
    lines = answer.body.decode().splitlines()
    substances = 4
    assert len(lines) == 1 + substances * len(example.request["conversions"])


def test_what_is_printed_for_pasting_is_answered(server):
    for command in paste(server.url).split("# ")[1:]:
        path = command.split("'")[1].removeprefix(server.url)
        body = command.split("-d '")[1].rsplit("'", 1)[0]
        answer = server.request("POST", path, body, {"Content-Type": "application/json"})
        assert answer.status == 200
