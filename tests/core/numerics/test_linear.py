"""Stacks of small systems."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.numerics.linear import solve_definite, solve_stack


@pytest.mark.parametrize("count", [3, 500])
@pytest.mark.parametrize("size", [1, 4, 8, 9])
def test_definite_systems_with_scaled_columns(count, size):
    """Down to columns scaled by 1e-12, as minor amounts scale them."""
    rng = np.random.default_rng(size)
    root = rng.normal(size=(count, size, size + 2))
    definite = root @ root.transpose(0, 2, 1)
    matrices = definite * 10 ** rng.uniform(-12, 0, (count, 1, size))
    right = rng.normal(size=(count, size))
    found = solve_definite(matrices, right)
    left = np.abs((matrices @ found[:, :, None])[:, :, 0] - right)
    size_ = (np.abs(matrices) @ np.abs(found)[:, :, None])[:, :, 0]
    assert (left <= 1e-13 * size_).all()
    assert_allclose(solve_stack(matrices, right[:, :, None])[:, :, 0], found, rtol=1e-5)


@pytest.mark.parametrize("count", [3, 500])
def test_a_singular_system_spoils_no_other(count):
    matrices = np.broadcast_to(np.eye(3), (count, 3, 3)).copy()
    matrices[1] = 1.0
    found = solve_definite(matrices, np.ones((count, 3)))
    assert not np.isfinite(found[1]).all()
    assert_allclose(np.delete(found, 1, axis=0), 1.0)
