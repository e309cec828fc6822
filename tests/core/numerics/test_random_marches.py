"""A slice of the random marches; the script runs more."""

import pytest

from tests.core.numerics.random_marches import apart, misses


@pytest.mark.parametrize("seed", range(500, 515))
def test_both_integrators_agree_on_random_networks(seed):
    assert apart(seed) < 1e-6


@pytest.mark.parametrize("seed", range(500, 515))
def test_no_event_of_a_swinging_system_is_missed(seed):
    assert misses(seed) == []
