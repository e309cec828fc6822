"""The law's own checks, and its products against the definition of the rate."""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.errors import Refused
from core.rates.constants import Arrhenius, Constant
from core.rates.equilibrium_constant import EquilibriumConstant, VantHoff, coefficient_sum
from core.rates.power_product import PowerProduct
from core.rates.rate_law import (
    ByAffinity,
    DenominatorFactor,
    DenominatorTerm,
    RateLaw,
    ReverseConstant,
)
from tests.core.reactors.builders import gas, liquid, rate_law, reaction_set, vector

R = 8.31446261815324
NAMES = {"A": -1, "B": -2, "R": 1, "S": 1, "I": 0}
REACTIONS = reaction_set(NAMES, condensed=("S",))
CHARGE = {"A": 2.0, "B": 3.0, "R": 0.5, "I": 1.0}
FEED = gas(REACTIONS, CHARGE, 600.0, 3e5, compressibility=0.95)
C = FEED.flows / float(FEED.volumetric_flow)
P = C * 0.95 * R * 600.0
Y = FEED.flows / 6.5
RATE = ("reactions", "r1", "rate")


def value(product: PowerProduct, concentrations=C) -> float:
    """Return a product at concentrations, through its own columns."""
    with np.errstate(divide="ignore"):
        columns = np.log(np.append(concentrations, concentrations[[0, 1, 2, 4]].sum()))
    ln = product.over(()).ln_value(
        lambda j: columns[j].reshape(1, 1), lambda values: values[:, None]
    )
    return float(np.exp(ln[0, 0]))


def refusal(law, feed=FEED):
    def use():
        law.check(REACTIONS, 0, feed)
        law.forward(REACTIONS, 0, feed)
        law.reverse_over_forward(REACTIONS, 0, feed)

    with pytest.raises(Refused) as raised:
        use()
    assert str(raised.value)
    return raised.value.faults[0]


@pytest.mark.parametrize(
    ("driving", "forces"), [("concentration", C), ("partial-pressure", P), ("mole-fraction", Y)]
)
def test_forward_rate_by_its_definition(driving, forces):
    law = rate_law(REACTIONS, {"A": 1.5, "B": -0.5, "I": 0.25}, 3e-3, driving=driving)
    expected = 3e-3 * forces[0] ** 1.5 * forces[1] ** -0.5 * forces[4] ** 0.25
    assert_allclose(value(law.forward(REACTIONS, 0, FEED)), expected, rtol=1e-13)


@pytest.mark.parametrize("driving", ["concentration", "partial-pressure", "mole-fraction"])
@pytest.mark.parametrize("floor", [1e-30, 1e30])
def test_floor_above_and_below(driving, floor):
    forces = {"concentration": C, "partial-pressure": P, "mole-fraction": Y}[driving]
    law = rate_law(REACTIONS, {"A": 1, "R": -2}, 0.1, driving=driving, floors={"R": floor})
    expected = 0.1 * forces[0] * max(forces[2], floor) ** -2.0
    assert_allclose(value(law.forward(REACTIONS, 0, FEED)), expected, rtol=1e-12)
    without = C.copy()
    without[2] = 0
    assert np.isfinite(value(law.forward(REACTIONS, 0, FEED), without))


def test_own_reverse_constant():
    reverse = ReverseConstant(Arrhenius(1e3, 40e3), vector(REACTIONS, {"R": 1, "I": -1}))
    law = rate_law(REACTIONS, {"A": 1, "B": 1}, 1e-5, reverse=reverse, activity=0.3)
    backward = 1e3 * np.exp(-40e3 / (R * 600)) * C[2] / C[4]
    ratio = law.reverse_over_forward(REACTIONS, 0, FEED)
    assert_allclose(value(ratio), backward / (1e-5 * C[0] * C[1]), rtol=1e-13)
    assert_allclose(value(law.forward(REACTIONS, 0, FEED)), 0.3e-5 * C[0] * C[1], rtol=1e-13)


@pytest.mark.parametrize("exponent", [1.0, 0.5, 2.0])
def test_affinity_to_a_power(exponent):
    k_p = 4e-6
    reverse = ByAffinity(EquilibriumConstant("pressure", Constant(k_p)), exponent)
    law = rate_law(REACTIONS, {"A": 1}, reverse=reverse)
    # S is condensed: unit activity.
    q = P[2] / (P[0] * P[1] ** 2)
    ratio = value(law.reverse_over_forward(REACTIONS, 0, FEED))
    assert_allclose(ratio, (q / k_p) ** exponent, rtol=1e-12)


def test_the_three_kinds_of_equilibrium_constant_agree():
    # K_p = K (p0)^n = K_c (R T)^n with n = -2 in the gas.
    n = coefficient_sum(REACTIONS.nu[0], FEED.in_phase)
    assert n == -2
    k, scale = 7.0, 0.95 * R * 600.0
    same = [
        EquilibriumConstant("thermodynamic", Constant(k)),
        EquilibriumConstant("thermodynamic", Constant(k * 1.01325**-n), 101325.0),
        EquilibriumConstant("pressure", Constant(k * 1e5**n)),
        EquilibriumConstant("concentration", Constant(k * (1e5 / scale) ** n)),
    ]
    values = [value(one.quotient_over_constant(REACTIONS, 0, FEED, ("K",))) for one in same]
    assert_allclose(values, values[0], rtol=1e-12)


def test_van_t_hoff():
    constant = VantHoff(500.0, 12.0, -45e3)
    expected = 12.0 * np.exp(45e3 / R * (1 / 600.0 - 1 / 500.0))
    assert_allclose(np.exp(constant.ln_at(600.0)), expected, rtol=1e-13)
    assert_allclose(np.exp(constant.ln_at(500.0)), 12.0, rtol=1e-15)
    # Hundreds of decades are no obstacle.
    assert np.isfinite(VantHoff(300.0, 1e300, -900e3).ln_at(250.0))
    with pytest.raises(Refused):
        constant.ln_at(None)


def test_an_absent_substance_of_order_zero_counts_nothing():
    law = RateLaw(0, np.array([[1.0, 0, 0, 0, 0], [1.0, 0, 0.5, 0, 0]]), Constant(1.0))
    product = law.forward(REACTIONS, 0, FEED).over((2,))
    without = C.copy()
    without[2] = 0.0
    with np.errstate(divide="ignore", invalid="ignore"):
        columns = np.log(np.append(without, 1.0))
        ln = product.ln_value(lambda j: np.full((2, 1), columns[j]), lambda values: values[:, None])
    assert_allclose(np.exp(ln[:, 0]), [C[0], 0.0], rtol=1e-14)


def test_orders_that_cancel_leave_nothing():
    ratio = PowerProduct(np.zeros(()), np.array([0.1 + 0.2, 0.0]))
    back = ratio.times(PowerProduct(np.zeros(()), np.array([-0.3, 0.0])))
    assert back.exponents[0] == 0


def test_rate_of_a_substance_that_does_not_react():
    law = rate_law(REACTIONS, {"A": 1}, of="I")
    fault = refusal(law)
    assert (fault.code, fault.subject) == ("rate-of-absent-substance", (*RATE, "of"))


def test_order_of_a_condensed_substance():
    fault = refusal(rate_law(REACTIONS, {"A": 1, "S": 1}))
    assert (fault.code, fault.subject) == ("order-outside-phase", (*RATE, "orders", "S"))
    reverse = ReverseConstant(Constant(1.0), vector(REACTIONS, {"S": 1}))
    fault = refusal(rate_law(REACTIONS, {"A": 1}, reverse=reverse))
    assert fault.subject == (*RATE, "reversible", "orders", "S")


def test_partial_pressures_of_a_liquid():
    dissolved = reaction_set({"A": -1, "R": 1})
    with pytest.raises(Refused) as raised:
        rate_law(dissolved, {"A": 1}, driving="partial-pressure").check(
            dissolved, 0, liquid(dissolved, {"A": 1})
        )
    assert raised.value.faults[0].code == "driving-needs-gas"


def test_floor_that_would_do_nothing_or_makes_no_sense():
    fault = refusal(rate_law(REACTIONS, {"A": 1}, floors={"A": 1.0}))
    assert (fault.code, fault.subject) == ("floor-without-negative-order", (*RATE, "floor", "A"))
    fault = refusal(rate_law(REACTIONS, {"A": 1, "R": -1}, floors={"R": -1.0}))
    assert (fault.code, fault.subject) == ("impossible-value", (*RATE, "floor", "R"))
    refusal(rate_law(REACTIONS, {"A": 1, "R": -1}, floors={"R": np.nan}))


@pytest.mark.parametrize("bad", [0.0, -1.0, np.nan])
def test_factors_above_zero(bad):
    fault = refusal(rate_law(REACTIONS, {"A": 1}, activity=bad))
    assert (fault.code, fault.subject) == ("impossible-value", (*RATE, "activity"))
    fault = refusal(rate_law(REACTIONS, {"A": 1}, effectiveness=bad))
    assert (fault.code, fault.subject) == ("impossible-value", (*RATE, "effectiveness"))
    affinity = ByAffinity(EquilibriumConstant("pressure", Constant(1.0)), bad)
    fault = refusal(rate_law(REACTIONS, {"A": 1}, reverse=affinity))
    assert fault.subject == (*RATE, "reversible", "affinity_exponent")


def test_orders_must_be_numbers():
    fault = refusal(rate_law(REACTIONS, {"A": np.nan}))
    assert (fault.code, fault.subject) == ("impossible-value", (*RATE, "orders"))


@pytest.mark.parametrize(
    ("nu", "kind", "says"),
    [
        ({"A": -1, "R": 1}, "pressure", "powers of pressure"),
        ({"A": -2, "R": 1}, "thermodynamic", "changes the number of moles"),
    ],
)
def test_equilibrium_constants_that_say_nothing_about_a_liquid(nu, kind, says):
    dissolved = reaction_set(nu)
    constant = EquilibriumConstant(kind, Constant(2.0))
    with pytest.raises(Refused) as raised:
        constant.quotient_over_constant(dissolved, 0, liquid(dissolved, {"A": 1}), ("K",))
    fault = raised.value.faults[0]
    assert (fault.code, fault.subject) == ("equilibrium-constant-does-not-fit", ("K",))
    assert says in str(fault)


def test_a_number_for_a_liquid_without_change_of_moles_is_k_c():
    dissolved = reaction_set({"A": -1, "B": -1, "R": 2})
    feed = liquid(dissolved, {"A": 400, "B": 500, "R": 100})
    by_number = EquilibriumConstant("thermodynamic", Constant(2.0))
    by_concentration = EquilibriumConstant("concentration", Constant(2.0))
    first, second = (
        k.quotient_over_constant(dissolved, 0, feed, ("K",)) for k in (by_number, by_concentration)
    )
    assert_allclose(first.ln_factor, second.ln_factor, rtol=0)
    assert_allclose(first.exponents, second.exponents, rtol=0)


def test_a_gas_that_leaves_a_liquid_has_no_place_in_its_equilibrium():
    from dataclasses import replace

    base = reaction_set({"A": -1, "R": 1, "G": 1})
    gaseous = replace(base.substances[2], phase="gas")
    reactions = replace(base, substances=(*base.substances[:2], gaseous))
    feed = replace(liquid(base, {"A": 1}), in_phase=np.array([True, True, False]))
    constant = EquilibriumConstant("concentration", Constant(2.0))
    with pytest.raises(Refused) as raised:
        constant.quotient_over_constant(reactions, 0, feed, ("K",))
    assert raised.value.faults[0].facts["gas"] == "G"


def test_needs_a_temperature_only_where_something_depends_on_it():
    constant, arrhenius = Constant(1.0), Arrhenius(1.0, 1e3)
    orders = np.array([1.0])
    assert not RateLaw(0, orders, constant).needs_temperature
    assert RateLaw(0, orders, arrhenius).needs_temperature
    assert RateLaw(
        0, orders, constant, reverse=ReverseConstant(arrhenius, orders)
    ).needs_temperature
    hot = EquilibriumConstant("concentration", VantHoff(300.0, 1.0, 1e3))
    assert RateLaw(0, orders, constant, reverse=ByAffinity(hot)).needs_temperature


def hindrance(law, concentrations=C):
    """Return the denominator at concentrations."""
    with np.errstate(divide="ignore"):
        columns = np.log(np.append(concentrations, concentrations[[0, 1, 2, 4]].sum()))
        found = [
            factor.over(()).ln_value(
                lambda j: columns[j].reshape(1, 1), lambda values: values[:, None]
            )
            for factor in law.hindrances(REACTIONS, 0, FEED)
        ]
    return float(np.exp(sum(found))[0, 0])


def term(k, **orders):
    return DenominatorTerm(Constant(k), vector(REACTIONS, orders))


@pytest.mark.parametrize(
    ("driving", "d"), [("concentration", C), ("partial-pressure", P), ("mole-fraction", Y)]
)
def test_denominator_by_its_definition(driving, d):
    scale = 1 / d[0]
    factors = (
        DenominatorFactor(1.0, (term(0.3 * scale, A=1), term(2.0 * scale**0.5, R=0.5)), 2.0),
        DenominatorFactor(0.0, (term(1.5, A=1, I=-1), term(0.2 * scale, B=1)), 0.7),
    )
    law = rate_law(REACTIONS, {"A": 1}, driving=driving, denominator=factors)
    first = 1 + 0.3 * scale * d[0] + 2.0 * (scale * d[2]) ** 0.5
    second = 1.5 * d[0] / d[4] + 0.2 * scale * d[1]
    assert_allclose(hindrance(law), first**2 * second**0.7, rtol=1e-13)


def test_a_floor_holds_in_the_denominator_too():
    factors = (DenominatorFactor(1.0, (term(0.3, A=1, R=-1.5),)),)
    law = rate_law(REACTIONS, {"A": 1}, denominator=factors, floors={"R": 2 * C[2]})
    law.check(REACTIONS, 0, FEED)
    assert_allclose(hindrance(law), 1 + 0.3 * C[0] * (2 * C[2]) ** -1.5, rtol=1e-13)
    without = C.copy()
    without[2] = 0.0
    assert_allclose(hindrance(law, without), 1 + 0.3 * C[0] * (2 * C[2]) ** -1.5, rtol=1e-13)


def test_constants_of_adsorption_follow_temperature():
    constant = VantHoff(550.0, 0.8e-5, -45e3)
    law = rate_law(
        REACTIONS,
        {"A": 1},
        driving="partial-pressure",
        denominator=(
            DenominatorFactor(1.0, (DenominatorTerm(constant, vector(REACTIONS, {"A": 1})),)),
        ),
    )
    k = 0.8e-5 * np.exp(45e3 / R * (1 / 600 - 1 / 550))
    assert_allclose(hindrance(law), 1 + k * P[0], rtol=1e-13)
    assert law.needs_temperature


def test_denominators_that_make_no_sense():
    outside = (DenominatorFactor(1.0, (term(1.0, S=1),)),)
    fault = refusal(rate_law(REACTIONS, {"A": 1}, denominator=outside))
    where = (*RATE, "denominator", 0)
    assert (fault.code, fault.subject) == (
        "order-outside-phase",
        (*where, "terms", 0, "orders", "S"),
    )
    for factor in (DenominatorFactor(-1.0, (term(1.0, A=1),)), DenominatorFactor(1.0, ())):
        fault = refusal(rate_law(REACTIONS, {"A": 1}, denominator=(factor,)))
        assert (fault.code, fault.subject) == ("impossible-value", (*where, "leading"))
    factor = DenominatorFactor(1.0, (term(1.0, A=1),), 0.0)
    fault = refusal(rate_law(REACTIONS, {"A": 1}, denominator=(factor,)))
    assert fault.subject == (*where, "power")
