"""A slice of the seeded random reactors of every kind."""

import pytest

from tests.core.reactors.random_reactors import KINDS, check


@pytest.mark.parametrize("kind", KINDS)
def test_none_fails(kind):
    _, failed, _ = check(kind, 6 if kind in ("tanks-in-series", "train") else 15, 2)
    assert failed == []
