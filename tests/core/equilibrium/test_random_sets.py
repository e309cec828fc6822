import pytest

from tests.core.equilibrium.cases import KINDS
from tests.core.equilibrium.random_sets import run


@pytest.mark.parametrize("kind", KINDS, ids=lambda kind: kind.name)
def test_a_slice_of_the_random_sets(kind):
    found = run(kind, 400, seed=7)
    assert found.failures == 0
    assert found.residual <= 1e-10
    assert found.elements <= 1e-10
