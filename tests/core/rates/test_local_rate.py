"""The rate at one place is the one that the path of one reaction sees there."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from core.constants import GAS_CONSTANT as R
from core.numerics.straight_line import record
from core.rates.constants import Arrhenius, Constant, ConstantAt
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff
from core.rates.local_rate import Place, local_rate
from core.rates.pellet import Pellet
from core.rates.rate_law import (
    ByAffinity,
    DenominatorFactor,
    DenominatorTerm,
    RateLaw,
    ReverseConstant,
)
from tests.core.reactors.builders import gas, liquid, reaction_set

ORDERS = st.sampled_from([0.0, 0.5, 1.0, 1.5, 2.0, -0.5, -1.0])
FLOWS = st.floats(0.05, 5.0)
REACTIONS = reaction_set({"A": -1, "B": -2, "R": 1, "I": 0})
FIRST = reaction_set({"A": -2, "R": 3})


def _place(stream):
    c = stream.flows / stream.volumetric_flow
    return Place(
        c.tolist(),
        stream.in_phase,
        stream.phase == "gas",
        float(c[stream.in_phase].sum()),
        stream.temperature,
        stream.compressibility,
    )


def _along_a_path(law, reactions, stream):
    """Rate of extent by the products of powers that the path of one reaction uses."""
    ln = np.log(stream.flows / stream.volumetric_flow)
    ln = np.append(ln, np.log((stream.flows / stream.volumetric_flow)[stream.in_phase].sum()))

    def columns(j):
        return ln[None, j : j + 1]

    def rows(a):
        return np.reshape(a, (-1, 1))

    def value(product):
        return product.over(()).ln_value(columns, rows).item()

    total = value(law.forward(reactions, 0, stream))
    for factor in law.hindrances(reactions, 0, stream):
        total -= factor.over(()).ln_value(columns, rows).item()
    pores = law.pores(reactions, 0, stream)
    if pores is not None:
        total += pores.over(()).ln_effectiveness(rows).item()
    reverse = law.reverse_over_forward(reactions, 0, stream)
    net = 1.0 if reverse is None else -np.expm1(value(reverse))
    return np.exp(total) * net / abs(reactions.nu[0, law.of])


@st.composite
def _laws(draw):
    def orders():
        return np.array([draw(ORDERS) for _ in range(3)] + [0.0])

    of = draw(st.sampled_from([0, 1, 2]))
    driving = draw(st.sampled_from(["concentration", "partial-pressure", "mole-fraction"]))
    reverse = draw(st.sampled_from(["none", "affinity", "own"]))
    kind = draw(st.sampled_from(["pressure", "concentration", "thermodynamic"]))
    k = EquilibriumConstant(kind, VantHoff(500.0, draw(st.floats(1e-4, 1e4)), -4e4))
    main = orders()
    floors = np.where(main < 0, draw(st.floats(1e-3, 1e3)), 0.0)
    term = DenominatorTerm(Arrhenius(draw(st.floats(1e-6, 1e-3)), -2e4), np.abs(orders()))
    return RateLaw(
        of=of,
        orders=main,
        constant=ConstantAt(520.0, draw(st.floats(1e-6, 1e3)), 6e4),
        driving=driving,
        reverse={
            "none": None,
            "affinity": ByAffinity(k, draw(st.sampled_from([0.5, 1.0, 2.0]))),
            "own": ReverseConstant(Constant(draw(st.floats(1e-6, 1e-2))), orders()),
        }[reverse],
        floors=draw(st.sampled_from([None, floors])),
        activity=draw(st.floats(0.1, 1.0)),
        effectiveness=draw(st.floats(0.1, 1.0)),
        denominator=draw(
            st.sampled_from([(), (DenominatorFactor(1.0, (term,), 2.0),) * 2]),
        ),
        per="bed-volume",
    )


@given(_laws(), st.lists(FLOWS, min_size=4, max_size=4), st.floats(400.0, 700.0))
def test_any_law_in_a_gas(law, flows, t):
    stream = gas(REACTIONS, dict(zip("ABRI", flows, strict=True)), t, 3e5, compressibility=0.93)
    expected = _along_a_path(law, REACTIONS, stream)
    found = float(local_rate(law, REACTIONS, 0, _place(stream)))
    near = 1e-12 * float(local_rate(law_without_reverse(law), REACTIONS, 0, _place(stream)))
    assert found == pytest.approx(expected, rel=1e-9, abs=near)


def law_without_reverse(law):
    return RateLaw(law.of, law.orders, law.constant, law.driving, None, law.floors, law.activity)


@given(st.sampled_from(["sphere", "cylinder", "slab"]), st.floats(1e-9, 1e-2), st.floats(0.1, 9))
def test_pellets_of_a_reversible_first_order(geometry, diffusivity, ratio):
    law = RateLaw(
        of=0,
        orders=np.array([1.0, 0.0]),
        constant=ConstantAt(500.0, 0.4, 7e4),
        reverse=ReverseConstant(Constant(0.4 * ratio), np.array([0.0, 1.0])),
        effectiveness=Pellet(geometry, 2e-3, diffusivity, void_fraction=0.4),
        per="bed-volume",
    )
    stream = gas(FIRST, {"A": 1.0, "R": 0.3}, 530.0)
    expected = _along_a_path(law, FIRST, stream)
    assert float(local_rate(law, FIRST, 0, _place(stream))) == pytest.approx(expected, rel=1e-11)

    def at(_, t):
        place = _place(stream)
        return [
            local_rate(law, FIRST, 0, Place(place.concentrations, place.in_phase, True, 0.0, t))
        ]

    line = record(at, 2)
    assert line.on_floats()(0.0, np.array([530.0]))[0] == pytest.approx(expected, rel=1e-11)
    step = 1e-3
    f = line.on_floats()
    slope = (f(0, np.array([530 + step]))[0] - f(0, np.array([530 - step]))[0]) / (2 * step)
    exact = line.derivatives([1]).on_floats()(0.0, np.array([530.0]))[0]
    assert exact == pytest.approx(slope, rel=1e-6, abs=1e-9)


def test_a_thermodynamic_constant_counts_concentrations_in_a_liquid():
    reactions = reaction_set({"A": -1, "R": 1})
    law = RateLaw(
        0,
        np.array([1.0, 0.0]),
        Constant(0.2),
        reverse=ByAffinity(EquilibriumConstant("thermodynamic", Constant(4.0))),
    )
    stream = liquid(reactions, {"A": 100.0, "R": 80.0})
    assert float(local_rate(law, reactions, 0, _place(stream))) == pytest.approx(
        0.2 * (100 - 80 / 4.0), rel=1e-13
    )


def test_fugacity_coefficients_shift_the_equilibrium_of_a_gas():
    law = RateLaw(
        0,
        np.array([1.0, 0.0, 0.0, 0.0]),
        Constant(2.0),
        reverse=ByAffinity(EquilibriumConstant("thermodynamic", Constant(3.0))),
    )
    stream = gas(REACTIONS, {"A": 1.0, "B": 2.0, "R": 0.5, "I": 1.0}, 500.0, 1e6)
    ln_phi = [0.1, -0.2, 0.3, 0.5]
    place = _place(stream)
    real = Place(place.concentrations, place.in_phase, True, place.total, 500.0, 0.9, ln_phi)
    p = np.array(place.concentrations) * 0.9 * R * 500.0 / 1e5
    q = np.prod((p * np.exp(ln_phi)) ** np.array([-1.0, -2.0, 1.0, 0.0]))
    expected = 2.0 * place.concentrations[0] * (1 - q / 3.0)
    assert float(local_rate(law, REACTIONS, 0, real)) == pytest.approx(expected, rel=1e-12)
