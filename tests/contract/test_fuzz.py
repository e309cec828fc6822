"""A slice of the hostile and careless requests of :mod:`tests.fuzz`: no promise is broken."""

from __future__ import annotations

import warnings
from collections.abc import Iterator

import pytest
from flask import Flask

from tests.fuzz import DOUBTFUL, Caller, Finding, run, sweep


@pytest.fixture(autouse=True)
def as_before(app: Flask) -> Iterator[None]:
    """Leave logging and warnings as they were."""
    logger = app.logger
    handlers, propagate = list(logger.handlers), logger.propagate
    with warnings.catch_warnings():
        yield
    logger.handlers, logger.propagate = handlers, propagate


def broken(found: list[Finding]) -> list[str]:
    return [
        f"{each.route}, case {each.case}: {each.kind}: {each.detail[:300]}"
        for each in found
        if not each.kind.startswith(DOUBTFUL)
    ]


@pytest.mark.parametrize("seed", [11, 12, 13, 14])
def test_no_promise_is_broken(seed: int) -> None:
    assert broken(run(250, seed, order=0.3)) == []


def test_no_number_of_an_example_at_an_extreme_is_answered_with_a_fault() -> None:
    caller = Caller()
    for case, (route, body) in enumerate(sweep()):
        if case % 100 == 0:
            status, answer, _, _ = caller.post(route, body)
            assert status in (200, 400, 422), (route, body)
            assert b"NaN" not in answer
            assert b"Infinity" not in answer
