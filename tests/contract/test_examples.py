"""The packaged examples: they obey the contract, they run, and they answer as packaged."""

import json

import pytest

from schemas.contract import OPERATIONS
from schemas.examples import EXAMPLES, paste
from service.replay import answers
from tests.support import answer_validator, post, request_validator


def alike(found, packaged, place=""):
    """Hold two documents against each other: structure and words equal, numbers to 1e-9."""
    if isinstance(packaged, dict):
        assert isinstance(found, dict), place
        assert list(found) == list(packaged), place
        for name, inner in packaged.items():
            alike(found[name], inner, f"{place}/{name}")
    elif isinstance(packaged, list):
        assert len(found) == len(packaged), place
        for i, inner in enumerate(packaged):
            alike(found[i], inner, f"{place}/{i}")
    elif isinstance(packaged, float):
        # Linear algebra rounds differently from processor to processor.
        assert found == pytest.approx(packaged, rel=1e-9, abs=1e-6), place
    else:
        assert found == packaged, place


@pytest.mark.parametrize("example", EXAMPLES, ids=lambda example: example.name)
def test_an_example_obeys_the_contract_and_answers_as_packaged(client, example):
    breaks = list(request_validator(example.operation).iter_errors(example.request))
    assert bool(breaks) == (example.status == 400)
    response = post(client, example.operation, example.request)
    assert response.status_code == example.status
    packaged = example.answer()
    validator = answer_validator(example.operation, example.status)
    assert list(validator.iter_errors(packaged)) == []
    found = response.get_json()
    if example.status == 200:
        assert found["provenance"]["digest"] == packaged["provenance"]["digest"]
        found["provenance"]["release"] = packaged["provenance"]["release"]
    alike(found, packaged)


def test_the_examples_can_be_answered_again():
    assert {example.name for example, _ in answers()} == {example.name for example in EXAMPLES}


@pytest.mark.parametrize("status", [200, 422])
def test_every_calculation_has_an_example(status):
    calculations = {op.name for op in OPERATIONS if op.request is not None}
    assert {e.operation for e in EXAMPLES if e.status == status} == calculations


def test_every_reactor_kind_has_an_example_and_a_schema():
    from core.reactors.kinds import REACTOR_KINDS
    from schemas.reactors.reactor import REACTOR_SCHEMAS

    assert all(kind.kind == name for name, kind in REACTOR_KINDS.items())
    assert set(REACTOR_KINDS) == set(REACTOR_SCHEMAS)
    for question in ("volume", "rating"):
        shown = {e.request["reactor"]["kind"] for e in EXAMPLES if e.operation == question}
        assert shown == set(REACTOR_KINDS)


def test_what_is_pasted_runs(client):
    for command in paste("").split("# ")[1:]:
        path = command.split("'")[1]
        body = command.split("-d '")[1].rsplit("'", 1)[0]
        assert "'" not in body
        response = client.post(path, data=body, headers={"Content-Type": "application/json"})
        assert response.status_code == 200
        assert json.loads(response.get_data())["result"]
