"""Sizes by rates with denominators and by any basis, against integrals in closed form."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.errors import Refused
from core.rates.constants import Constant
from core.rates.equilibrium_constant import EquilibriumConstant
from core.rates.pellet import Pellet, effectiveness_factor
from core.rates.rate_law import ByAffinity, DenominatorFactor, DenominatorTerm
from core.reactors.one_reaction.plug_flow import Batch, PlugFlow
from core.reactors.one_reaction.sizing import SizingProblem
from core.reactors.one_reaction.stirred_tank import StirredTank
from tests.core.reactors.builders import gas, liquid, rate_law, reaction_set, size, vector
from tests.core.reactors.high_precision import size_of

REACTIONS = reaction_set({"A": -1, "R": 1, "I": 0})
C0 = 2000.0


def term(k, **orders):
    return DenominatorTerm(Constant(k), vector(REACTIONS, orders))


@pytest.mark.parametrize("km", [1.0, 300.0, 1e5])
@pytest.mark.parametrize("x", [1e-6, 0.6, 1 - 1e-6])
def test_michaelis_and_menten(km, x):
    # r = v c/(K_m + c): v t = c0 X + K_m ln(1/(1 - X)) (common practice, closed form).
    v = 0.4
    law = rate_law(
        REACTIONS,
        {"A": 1},
        v / km,
        denominator=(DenominatorFactor(1.0, (term(1 / km, A=1),)),),
    )
    expected = (C0 * x - km * np.log1p(-x)) / v
    batch = size(REACTIONS, liquid(REACTIONS, {"A": C0}, batch=True), law, x, Batch())
    assert_allclose(batch.size, expected, rtol=1e-11)
    pipe = size(REACTIONS, liquid(REACTIONS, {"A": C0}), law, x, PlugFlow())
    assert_allclose(pipe.space_time, expected, rtol=1e-11)
    tank = size(REACTIONS, liquid(REACTIONS, {"A": C0}), law, x, StirredTank())
    c = C0 * (1 - x)
    assert_allclose(tank.space_time, C0 * x * (km + c) / (v * c), rtol=1e-9)


@pytest.mark.parametrize("seed", [1.0, 1e-6])
@pytest.mark.parametrize("x", [0.3, 0.999])
def test_autocatalysis(seed, x):
    # r = k c_A c_R from c_R0: k (c_A0 + c_R0) t = ln[(c_R/c_R0)/(c_A/c_A0)] (common practice).
    k, r0 = 1e-5, seed * C0
    law = rate_law(REACTIONS, {"A": 1, "R": 1}, k)
    charge = liquid(REACTIONS, {"A": C0, "R": r0}, batch=True)
    expected = (np.log1p(x / seed) - np.log1p(-x)) / (k * (C0 + r0))
    assert_allclose(size(REACTIONS, charge, law, x, Batch()).size, expected, rtol=1e-11)


def test_substrate_inhibition_and_product_on_the_sites():
    # r = k c/(1 + K c)^2: k t = int (1 + K c)^2/c dc = ln(c0/c) + 2K(c0-c) + K^2 (c0^2-c^2)/2.
    k, big_k, x = 0.02, 3e-3, 0.95
    law = rate_law(
        REACTIONS, {"A": 1}, k, denominator=(DenominatorFactor(1.0, (term(big_k, A=1),), 2.0),)
    )
    c = C0 * (1 - x)
    expected = (np.log(C0 / c) + 2 * big_k * (C0 - c) + big_k**2 * (C0**2 - c**2) / 2) / k
    charge = liquid(REACTIONS, {"A": C0}, batch=True)
    assert_allclose(size(REACTIONS, charge, law, x, Batch()).size, expected, rtol=1e-12)
    # r = k c_A/(1 + K_R c_R): k t = (1 + K_R c0) ln(c0/c) - K_R (c0 - c).
    law = rate_law(REACTIONS, {"A": 1}, k, denominator=(DenominatorFactor(1, (term(big_k, R=1),)),))
    expected = ((1 + big_k * C0) * np.log(C0 / c) - big_k * (C0 - c)) / k
    assert_allclose(size(REACTIONS, charge, law, x, Batch()).size, expected, rtol=1e-12)


def test_a_denominator_that_is_all_terms_takes_their_order_away():
    # r = k c/(K c) = k/K: zero order, which comes to an end at t = c0 K/k.
    law = rate_law(REACTIONS, {"A": 1}, 0.1, denominator=(DenominatorFactor(0, (term(0.5, A=1),)),))
    charge = liquid(REACTIONS, {"A": C0}, batch=True)
    assert_allclose(size(REACTIONS, charge, law, 1.0, Batch()).size, C0 * 0.5 / 0.1, rtol=1e-11)
    # Beside a number it is of first order in the end, and never complete.
    law = replace(law, denominator=(DenominatorFactor(1.0, (term(0.5, A=1),)),))
    with pytest.raises(Refused) as raised:
        size(REACTIONS, charge, law, 1.0, Batch())
    assert raised.value.faults[0].code == "target-out-of-reach"


@pytest.mark.parametrize("driving", ["partial-pressure", "mole-fraction"])
def test_reversible_and_hindered_against_forty_digits(driving):
    # CO + 2 H2 <=> M over occupied sites, a gas that shrinks.
    reactions = reaction_set({"CO": -1, "H2": -2, "M": 1, "N2": 0})
    feed = gas(reactions, {"CO": 1.0, "H2": 2.5, "M": 0.01, "N2": 0.3}, 520.0, 60e5)
    scale = 1e-5 if driving == "partial-pressure" else 60.0

    def one(k, **orders):
        return DenominatorTerm(Constant(k), vector(reactions, orders))

    law = rate_law(
        reactions,
        {"CO": 1, "H2": 1.5},
        2.0 * scale**2.5,
        driving=driving,
        reverse=ByAffinity(EquilibriumConstant("pressure", Constant(3e-13))),
        denominator=(
            DenominatorFactor(1.0, (one(0.05 * scale, CO=1), one(0.3 * scale**0.5, H2=0.5)), 3.0),
            DenominatorFactor(1.0, (one(2 * scale, M=1),)),
        ),
        activity=0.7,
    )
    limit = size(reactions, feed, law, 0.0, PlugFlow()).limit.conversion
    for short in (0.4, 1e-4):
        x = float(limit) * (1 - short)
        found = size(reactions, feed, law, x, PlugFlow())
        problem = SizingProblem(reactions, 0, feed, law, x, PlugFlow())
        assert_allclose(float(found.size), float(size_of(problem)), rtol=1e-10)


def test_negative_orders_in_a_denominator_need_a_floor_where_their_substance_is_absent():
    hindered = (DenominatorFactor(1.0, (term(3.0, R=-1),)),)
    law = rate_law(REACTIONS, {"A": 1}, 0.02, denominator=hindered)
    charge = liquid(REACTIONS, {"A": C0}, batch=True)
    with pytest.raises(Refused) as raised:
        size(REACTIONS, charge, law, 0.5, Batch())
    fault = raised.value.faults[0]
    assert fault.code == "negative-order-needs-floor"
    assert fault.subject[-6:] == ("denominator", 0, "terms", 0, "orders", "R")
    # With one: 1 + 3/floor until c_R is the floor, then 1 + 3/c_R.
    law = rate_law(REACTIONS, {"A": 1}, 0.02, denominator=hindered, floors={"R": 50.0})
    found = size(REACTIONS, charge, law, 0.5, Batch())
    first = -np.log1p(-50 / C0) * (1 + 3 / 50)
    rest = np.log((C0 - 50) / 1000) + 3 / C0 * (np.log(1000 / 50) + np.log((C0 - 50) / 1000))
    assert_allclose(found.size, (first + rest) / 0.02, rtol=1e-12)


def test_the_basis_of_the_rate_is_that_of_the_size():
    feed = gas(REACTIONS, {"A": 1.0, "I": 2.0})
    by_volume = size(REACTIONS, feed, rate_law(REACTIONS, {"A": 1}, 0.3), 0.8, PlugFlow())
    bed = size(
        REACTIONS, feed, rate_law(REACTIONS, {"A": 1}, 0.3, per="bed-volume"), 0.8, PlugFlow()
    )
    mass = rate_law(REACTIONS, {"A": 1}, 0.3, per="catalyst-mass")
    kilograms = size(REACTIONS, feed, mass, 0.8, PlugFlow(), points=5)
    assert by_volume.size == bed.size == kilograms.size
    assert (by_volume.dimension, by_volume.per) == ("volume", "fluid-volume")
    assert (bed.dimension, bed.per) == ("volume", "bed-volume")
    assert (kilograms.dimension, kilograms.per) == ("catalyst_mass", "catalyst-mass")
    assert bed.space_time == by_volume.space_time
    assert bed.mean_residence_time is kilograms.space_time is None
    tank = size(REACTIONS, feed, mass, 0.8, StirredTank())
    assert (tank.dimension, tank.space_time, tank.mean_residence_time) == (
        "catalyst_mass",
        None,
        None,
    )


def test_a_batch_with_catalyst():
    charge = liquid(REACTIONS, {"A": C0}, 0.5, batch=True)
    law = rate_law(REACTIONS, {"A": 1}, 2e-6, per="catalyst-mass")
    found = size(REACTIONS, charge, law, 0.9, Batch(catalyst_mass=40.0))
    # -dN_A/dt = k c_A W: ln 10 = k W t/V.
    assert_allclose(found.size, np.log(10) * 0.5 / (2e-6 * 40.0), rtol=1e-12)
    assert found.dimension == "time"
    law = replace(law, per="bed-volume", constant=Constant(2e-3))
    found = size(REACTIONS, charge, law, 0.9, Batch(bed_volume=0.1))
    assert_allclose(found.size, np.log(10) * 0.5 / (2e-3 * 0.1), rtol=1e-12)
    for reactor, code in (
        (Batch(), "field-needed"),
        (Batch(catalyst_mass=3.0), "field-needed"),
        (Batch(bed_volume=0.0), "impossible-value"),
    ):
        with pytest.raises(Refused) as raised:
            size(REACTIONS, charge, law, 0.9, reactor)
        fault = raised.value.faults[0]
        assert (fault.code, fault.subject) == (code, ("reactor", "bed_volume"))


def test_a_pellet_is_a_factor_on_the_rate():
    feed = liquid(REACTIONS, {"A": C0, "R": 10.0})
    reverse = ByAffinity(EquilibriumConstant("concentration", Constant(4.0)))
    plain = rate_law(REACTIONS, {"A": 1}, 1e-6, per="catalyst-mass", reverse=reverse)
    pellet = Pellet("sphere", 4e-3, 2e-9, particle_density=1400.0)
    slowed = replace(plain, effectiveness=pellet)
    phi = 4e-3 * np.sqrt(1e-6 * 1400 * 1.25 / 2e-9)
    factor = float(effectiveness_factor("sphere", np.array(phi)))
    assert 0.05 < factor < 0.7
    both = [size(REACTIONS, feed, law, 0.6, PlugFlow()).size for law in (plain, slowed)]
    assert_allclose(both[0] / both[1], factor, rtol=1e-12)


def test_several_cases_at_once_are_each_as_alone():
    k = np.array([1e-3, 0.02, 0.4])
    leading, power = np.array([1.0, 0.0, 2.0]), np.array([1.0, 2.0, 0.5])

    def law(i):
        return rate_law(
            REACTIONS,
            {"A": 1},
            0.02,
            denominator=(
                DenominatorFactor(
                    leading[i],
                    (
                        DenominatorTerm(Constant(k[i]), vector(REACTIONS, {"A": 1})),
                        DenominatorTerm(Constant(1e-3), vector(REACTIONS, {"R": 0.5})),
                    ),
                    power[i],
                ),
            ),
        )

    feed = liquid(REACTIONS, {"A": C0})
    together = size(REACTIONS, feed, law(slice(None)), 0.9, PlugFlow()).size
    alone = [float(size(REACTIONS, feed, law(i), 0.9, PlugFlow()).size) for i in range(3)]
    assert_allclose(together, alone, rtol=1e-12)
