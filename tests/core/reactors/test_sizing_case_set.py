"""A sample of the benchmark's case set against 30 digits.

Up to 1 - X = 1e-6, or a ten-thousandth short of equilibrium.
"""

from tests.benchmark.plug_flow_reference import errors


def test_sample_of_the_case_set():
    found = errors(60)
    assert found.size == 60
    assert found.max() < 1e-11
