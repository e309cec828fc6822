import pytest
from numpy.testing import assert_allclose

from core.rates.equilibrium_constant import expected_unit_exponents as of_equilibrium
from core.rates.equilibrium_constant import expected_unit_parts as equilibrium_parts
from core.rates.rate_law import (
    expected_adsorption_exponents,
    expected_adsorption_parts,
    expected_unit_exponents,
    expected_unit_parts,
)

# Exponents of (kg, m, s, K, mol) of each unit named in the parts.
UNITS = {
    "mol": (0, 0, 0, 0, 1),
    "m3": (0, 3, 0, 0, 0),
    "s": (0, 0, 1, 0, 0),
    "bar": (1, -1, -2, 0, 0),
    "kg": (1, 0, 0, 0, 0),
}


@pytest.mark.parametrize(
    ("driving", "n", "exponents", "parts"),
    [
        ("concentration", 0, (0, -3, -1, 0, 1), [("mol", 1), ("m3", -1), ("s", -1)]),
        ("concentration", 1, (0, 0, -1, 0, 0), [("s", -1)]),
        ("concentration", 2, (0, 3, -1, 0, -1), [("mol", -1), ("m3", 1), ("s", -1)]),
        ("concentration", 0.5, (0, -1.5, -1, 0, 0.5), [("mol", 0.5), ("m3", -0.5), ("s", -1)]),
        (
            "partial-pressure",
            1,
            (-1, -2, 1, 0, 1),
            [("mol", 1), ("m3", -1), ("s", -1), ("bar", -1)],
        ),
        ("partial-pressure", 0, (0, -3, -1, 0, 1), [("mol", 1), ("m3", -1), ("s", -1)]),
        ("mole-fraction", 2.5, (0, -3, -1, 0, 1), [("mol", 1), ("m3", -1), ("s", -1)]),
    ],
)
def test_unit_of_k(driving, n, exponents, parts):
    assert expected_unit_exponents(driving, n) == exponents
    assert expected_unit_parts(driving, n) == parts


@pytest.mark.parametrize("driving", ["concentration", "partial-pressure", "mole-fraction"])
@pytest.mark.parametrize("n", [-1.0, 0.0, 0.75, 1.0, 3.0])
def test_parts_and_exponents_agree(driving, n):
    spelled = [
        sum(UNITS[name][i] * power for name, power in expected_unit_parts(driving, n))
        for i in range(5)
    ]
    assert_allclose(spelled, expected_unit_exponents(driving, n), atol=1e-15)


@pytest.mark.parametrize(
    ("kind", "total", "exponents", "parts"),
    [
        ("pressure", -0.5, (-0.5, 0.5, 1.0, 0.0, 0.0), [("bar", -0.5)]),
        ("pressure", 0.0, (0, 0, 0, 0, 0), []),
        ("concentration", 1.0, (0, -3, 0, 0, 1), [("mol", 1.0), ("m3", -1.0)]),
        ("thermodynamic", -0.5, (0, 0, 0, 0, 0), []),
    ],
)
def test_unit_of_an_equilibrium_constant(kind, total, exponents, parts):
    assert of_equilibrium(kind, total) == exponents
    assert equilibrium_parts(kind, total) == parts


@pytest.mark.parametrize(
    ("driving", "n", "exponents", "parts"),
    [
        ("concentration", 1, (-1, 3, -1, 0, 0), [("m3", 1), ("kg", -1), ("s", -1)]),
        ("concentration", 0, (-1, 0, -1, 0, 1), [("mol", 1), ("kg", -1), ("s", -1)]),
        (
            "partial-pressure",
            2,
            (-3, 2, 3, 0, 1),
            [("mol", 1), ("kg", -1), ("s", -1), ("bar", -2)],
        ),
        ("mole-fraction", 1.5, (-1, 0, -1, 0, 1), [("mol", 1), ("kg", -1), ("s", -1)]),
    ],
)
def test_unit_of_k_by_mass_of_catalyst(driving, n, exponents, parts):
    assert expected_unit_exponents(driving, n, "catalyst-mass") == exponents
    assert expected_unit_parts(driving, n, "catalyst-mass") == parts
    assert expected_unit_exponents(driving, n, "bed-volume") == expected_unit_exponents(driving, n)


@pytest.mark.parametrize("driving", ["concentration", "partial-pressure", "mole-fraction"])
@pytest.mark.parametrize("n", [-1.0, 0.0, 0.5, 2.0])
def test_parts_and_exponents_agree_of_mass_and_adsorption(driving, n):
    for parts, exponents in (
        (
            expected_unit_parts(driving, n, "catalyst-mass"),
            expected_unit_exponents(driving, n, "catalyst-mass"),
        ),
        (expected_adsorption_parts(driving, n), expected_adsorption_exponents(driving, n)),
    ):
        spelled = [sum(UNITS[name][i] * power for name, power in parts) for i in range(5)]
        assert_allclose(spelled, exponents, atol=1e-15)
