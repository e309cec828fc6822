"""Accounts whose answer is printed, or follows in closed form, against the estimation.

Sources stand beside each check, with how the value is known:

* [FelderRousseau2000] R. M. Felder, R. W. Rousseau, Elementary Principles of Chemical
  Processes, 3rd ed., Wiley, 2000.
* [DueckerWest1959] W. W. Duecker, J. R. West (eds.), The Manufacture of Sulfuric Acid, ACS
  Monograph 144, Reinhold, 1959.
* [GUM2008] JCGM 100:2008, Guide to the expression of uncertainty in measurement, annex H.
* [HimmelblauRiggs2004] D. M. Himmelblau, J. B. Riggs, Basic Principles and Calculations in
  Chemical Engineering, 7th ed., Prentice Hall, 2004.
* [NarasimhanJordache2000] S. Narasimhan, C. Jordache, Data Reconciliation and Gross Error
  Detection, Gulf, 2000.
"""

from __future__ import annotations

from statistics import NormalDist

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.special import chdtri

from core.outlet_analysis.consistency import DETECTABLE, sidak_limit
from core.outlet_analysis.conversion import ConversionResults, conversion_results
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.forms import Forms
from core.outlet_analysis.gauss_newton import Fit, curvature, least_squares
from core.outlet_analysis.reconciliation import estimate, estimate_feed
from core.reactions.reaction_set import ReactionSet
from tests.core.outlet_analysis.plant import (
    KMOL_H,
    account,
    analysis_of,
    reactions_of,
    shift_problem,
    stream_of,
)


def answer(problem: object) -> tuple[Estimate, ConversionResults]:
    found = estimate(problem)  # type: ignore[arg-type]
    return found, conversion_results(found)


def fractions(reactions: ReactionSet, flows: np.ndarray, left_out: set[str]) -> dict[str, float]:
    kept = {n: float(f) for n, f in zip(reactions.names, flows, strict=True) if n not in left_out}
    return {name: flow / sum(kept.values()) for name, flow in kept.items()}


# The two examples of the API document (an invented shift converter).


def test_shift_converter_from_a_dry_analysis() -> None:
    # Constructed: 120 kmol/h of CO, extent 88.8 kmol/h.
    found, results = answer(shift_problem())
    assert_allclose(results.conversion.value, 0.74, atol=5e-5)
    assert results.extents is not None
    assert_allclose(results.extents.value / KMOL_H, [88.80], atol=0.005)
    water = found.account.problem.reactions.index("H2O")
    assert_allclose(found.outlet_flows[water] / KMOL_H, 271.2, atol=0.05)
    assert found.chi_square < 1e-5
    assert found.degrees_of_freedom == 4
    assert not found.notes


def test_shift_converter_of_the_data_sheet() -> None:
    # Constructed: dry gas by volume as analysed, steam by mass, CO and CO2 alone at the outlet.
    reactions = reactions_of(
        {"shift": "CO + H2O <=> CO2 + H2"}, ["CO", "H2O", "CO2", "H2", "N2", "CH4"]
    )
    gas = stream_of(
        reactions,
        "gas",
        total=(10982.85 / 3600 / 0.022413969545, 0.015 * 10982.85 / 3600 / 0.0224),
        as_analysed=True,
        analysis=analysis_of(
            reactions,
            "gas",
            {
                "CO": (0.244898, 0.001),
                "CO2": (0.122449, 0.001),
                "H2": (0.428571, 0.002),
                "CH4": (0.020408, 0.0005),
            },
            removed=["H2O"],
            balance="N2",
        ),
    )
    steam = stream_of(reactions, "steam", kind="mass", flows={"H2O": (6.4854 / 3.6, 0.036)})
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions,
            "outlet",
            {"CO": (0.053905, 0.0005), "CO2": (0.257084, 0.001)},
            removed=["H2O"],
        ),
    )
    found, results = answer(account(reactions, "CO", [gas, steam], outlet))
    assert_allclose(results.conversion.value, 0.740, atol=5e-4)
    assert_allclose(found.feed_flows.sum() / KMOL_H, 850.0, atol=0.2)
    assert found.degrees_of_freedom == 1


# Wet and dry.


def test_dry_analysis_of_a_wet_gas() -> None:
    # [FelderRousseau2000] Example 4.8-1, from memory.
    reactions = reactions_of({}, ["N2", "CO2", "O2", "H2O"])
    feed = stream_of(
        reactions,
        "feed",
        flows={"N2": 60.0, "CO2": 15.0, "O2": 10.0, "H2O": 15.0},
        analysis=analysis_of(
            reactions,
            "feed",
            {"N2": (0.6, 0.1), "CO2": (0.2, 0.1), "O2": (0.2, 0.1)},
            removed=["H2O"],
        ),
    )
    found = estimate_feed(reactions, 0, (feed,))
    assert_allclose(found.readings.reconciled[4:], [0.706, 0.176, 0.118], atol=5e-4)


def test_wet_composition_from_a_dry_analysis_and_the_humidity() -> None:
    # [FelderRousseau2000] Example 4.8-1, second part, from memory.
    reactions = reactions_of({}, ["N2", "CO2", "CO", "O2", "H2O"])
    feed = stream_of(
        reactions,
        "feed",
        flows={"H2O": 7.0},
        total=100.0,
        analysis=analysis_of(
            reactions,
            "feed",
            {"N2": (0.65, 0.01), "CO2": (0.14, 0.01), "CO": (0.11, 0.01), "O2": (0.10, 0.01)},
            removed=["H2O"],
        ),
    )
    flows = estimate_feed(reactions, 0, (feed,)).feed_flows / 100
    assert_allclose(flows[[0, 1, 3]], [0.605, 0.130, 0.093], atol=6e-4)
    # The source rounds CO to two places.
    assert_allclose(flows[2], 0.100, atol=2.5e-3)


# Conversion from analyses.


def test_ethane_burned_in_excess_air_by_its_dry_flue_gas() -> None:
    # [FelderRousseau2000] Example 4.8-3 used the other way round, from memory. Nitrogen is the
    # tie substance; two parallel reactions change the number of moles.
    reactions = reactions_of(
        {"full": "2 C2H6 + 7 O2 -> 4 CO2 + 6 H2O", "partial": "2 C2H6 + 5 O2 -> 4 CO + 6 H2O"},
        ["C2H6", "O2", "N2"],
    )
    fed = {"C2H6": 100.0, "O2": 525.0, "N2": 525.0 * 3.76}
    printed = {"C2H6": 0.00417, "O2": 0.0970, "N2": 0.824, "CO": 0.0188, "CO2": 0.0563}
    u = {"C2H6": 1e-5, "O2": 2e-4, "N2": 5e-4, "CO": 6e-5, "CO2": 1e-4}
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions, "outlet", {n: (y, u[n]) for n, y in printed.items()}, removed=["H2O"]
        ),
    )
    found, results = answer(
        account(reactions, "C2H6", stream_of(reactions, "feed", flows=fed), outlet)
    )
    assert_allclose(results.conversion.value, 0.90, atol=2 * float(results.conversion.u))
    assert_allclose(results.conversion.value, 0.90, atol=5e-4)
    assert not found.inconsistent
    assert results.key_consumed_by is not None
    assert_allclose(results.key_consumed_by.value, [0.75, 0.25], atol=2e-3)
    flows = found.outlet_flows
    water = flows[reactions.index("H2O")]
    assert_allclose(water / (flows.sum() - water), 0.113, atol=5e-4)


@pytest.mark.parametrize(
    ("before", "after", "absorbed", "kept"),
    [
        (8.0, 0.2, 97.79338014042126, 97.5975975975976),
        (10.0, 3.0, 73.29842931937173, 71.06598984771574),
        (11.5, 0.03, 99.784033249745, 99.75409354881494),
    ],
)
def test_sulfur_dioxide_before_and_after_a_converter(
    before: float, after: float, absorbed: float, kept: float
) -> None:
    # [DueckerWest1959], from memory: X = 100 (A - B)/(A (1 - 0.015 B)) with SO3 absorbed before
    # the outlet gas is analysed; with SO3 left in the sample the factor is 0.005.
    reactions = reactions_of({"r1": "2 SO2 + O2 -> 2 SO3"}, ["SO2", "O2", "N2"])
    feed = stream_of(
        reactions,
        "feed",
        analysis=analysis_of(reactions, "feed", {"SO2": before / 100, "O2": 0.08}, balance="N2"),
    )
    for removed, expected in ((["SO3"], absorbed), ([], kept)):
        outlet = stream_of(
            reactions,
            "outlet",
            analysis=analysis_of(
                reactions, "outlet", {"SO2": (after / 100, 1e-4)}, removed=removed
            ),
        )
        found, results = answer(account(reactions, "SO2", feed, outlet))
        assert_allclose(100 * results.conversion.value, expected, atol=1e-6)
        assert [note.code for note in found.notes] == ["per-mole-of-key", "no-redundancy"]


def test_methane_chlorination_by_its_product_gas() -> None:
    # [HimmelblauRiggs2004] Example 10.1 used the other way round, from memory.
    reactions = reactions_of({"r1": "CH4 + Cl2 -> CH3Cl + HCl"}, ["CH4", "Cl2", "N2"])
    feed = stream_of(reactions, "feed", flows={"CH4": 40.0, "Cl2": 50.0, "N2": 10.0})
    printed = {"CH4": 0.132, "Cl2": 0.232, "CH3Cl": 0.268, "HCl": 0.268, "N2": 0.100}
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(reactions, "outlet", {n: (y, 5e-4) for n, y in printed.items()}),
    )
    found, results = answer(account(reactions, "CH4", feed, outlet))
    assert_allclose(results.conversion.value, 0.67, atol=1e-3)
    assert_allclose(found.outlet_flows.sum(), 100.0, rtol=1e-12)
    assert not found.inconsistent


# Closed forms, constructed (common practice): the naive ratio of fractions is wrong in each.


def test_ammonia_oxidation_where_nitrogen_is_no_tie() -> None:
    reactions = reactions_of(
        {"NO": "4 NH3 + 5 O2 -> 4 NO + 6 H2O", "N2": "4 NH3 + 3 O2 -> 2 N2 + 6 H2O"},
        ["NH3", "O2", "N2"],
    )
    fed = {"NH3": 10.0, "O2": 18.9, "N2": 71.1}
    extents = np.array([9.6 / 4, 0.3 / 4])
    flows = np.array([fed.get(n, 0.0) for n in reactions.names]) + extents @ reactions.nu
    assert_allclose(flows.sum(), 102.475, rtol=1e-12)
    wet = fractions(reactions, flows, set())
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions, "outlet", {n: (wet[n], 1e-4) for n in ("NH3", "NO", "O2", "N2")}
        ),
    )
    found, results = answer(
        account(reactions, "NH3", stream_of(reactions, "feed", flows=fed), outlet)
    )
    assert_allclose(results.conversion.value, 0.99, atol=1e-10)
    naive = 1 - wet["NH3"] / 0.10
    assert_allclose(naive, 0.9902415223225177, atol=1e-12)
    oxide = results.yields.products.index(reactions.index("NO"))
    assert_allclose(results.yields.selectivities.value[oxide], 9.6 / 9.9, rtol=1e-9)
    assert found.chi_square < 1e-12


def test_ethylene_oxidation_from_washed_gas_with_methane_as_tie() -> None:
    reactions = reactions_of(
        {"oxide": "2 C2H4 + O2 -> 2 C2H4O", "burn": "C2H4 + 3 O2 -> 2 CO2 + 2 H2O"},
        ["C2H4", "O2", "CO2", "CH4", "Ar"],
    )
    fed = {"C2H4": 25.0, "O2": 7.0, "CO2": 3.0, "CH4": 60.0, "Ar": 5.0}
    extents = np.array([2.0 / 2, 0.4])
    flows = np.array([fed.get(n, 0.0) for n in reactions.names]) + extents @ reactions.nu
    washed = fractions(reactions, flows, {"C2H4O", "H2O"})
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions, "outlet", {n: (y, 1e-3) for n, y in washed.items()}, removed=["C2H4O", "H2O"]
        ),
    )
    feed = stream_of(reactions, "feed", flows={n: (f, 0.01 * f) for n, f in fed.items()})
    found, results = answer(account(reactions, "C2H4", feed, outlet))
    assert_allclose(results.conversion.value, 0.096, atol=1e-10)
    oxide = results.yields.products.index(reactions.index("C2H4O"))
    assert_allclose(results.yields.selectivities.value[oxide], 2.0 / 2.4, rtol=1e-9)
    # What enters as O2 leaves as O2, oxide, carbon dioxide or water.
    by_name = dict(zip(reactions.names, found.outlet_flows - found.feed_flows, strict=True))
    oxygen = 2 * by_name["O2"] + by_name["C2H4O"] + 2 * by_name["CO2"] + by_name["H2O"]
    assert abs(oxygen) < 1e-12


def test_methanol_to_formaldehyde_from_the_tail_gas_of_the_absorber() -> None:
    reactions = reactions_of(
        {
            "split": "CH4O -> CH2O + H2",
            "oxidise": "2 CH4O + O2 -> 2 CH2O + 2 H2O",
            "decompose": "CH2O -> CO + H2",
        },
        ["CH4O", "O2", "N2"],
    )
    fed = {"CH4O": 40.0, "O2": 14.0, "N2": 52.666666666666664}
    extents = np.array([24.0, 11.0 / 2, 1.5])
    flows = np.array([fed.get(n, 0.0) for n in reactions.names]) + extents @ reactions.nu
    absorbed = {"CH4O", "CH2O", "H2O"}
    tail = fractions(reactions, flows, absorbed)
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions,
            "outlet",
            {n: (tail[n], 1e-3) for n in ("N2", "O2", "H2", "CO")},
            removed=sorted(absorbed),
        ),
    )
    feed = stream_of(reactions, "feed", flows={n: (f, 0.01 * f) for n, f in fed.items()})
    _, results = answer(account(reactions, "CH4O", feed, outlet))
    assert_allclose(results.conversion.value, 0.875, atol=1e-10)
    aldehyde = results.yields.products.index(reactions.index("CH2O"))
    assert_allclose(results.yields.yields.value[aldehyde], 0.8375, atol=1e-10)


def test_nitrobenzene_hydrogenation_by_weight_of_the_organic_phase() -> None:
    reactions = reactions_of({"r1": "C6H5NO2 + 3 H2 -> C6H5NH2 + 2 H2O"}, ["C6H5NO2", "H2"])
    feed = stream_of(reactions, "feed", flows={"C6H5NO2": 1.0, "H2": 5.0})
    outlet = stream_of(
        reactions,
        "outlet",
        analysis=analysis_of(
            reactions,
            "outlet",
            {"C6H5NH2": (0.90, 0.01), "C6H5NO2": (0.06, 0.001)},
            basis="mass",
            removed=["H2O", "H2"],
            normalised=True,
        ),
    )
    _, results = answer(account(reactions, "C6H5NO2", feed, outlet))
    # Molar masses 93.129 and 123.111 of the source are rounded to 0.001.
    assert_allclose(results.conversion.value, 0.9519902628835846, atol=2e-6)


# Linear reconciliation and critical values: the same solver on forms without denominators.


def fitted(numerators: np.ndarray, measured: np.ndarray) -> tuple[np.ndarray, Fit]:
    """Two unknowns of linear readings, variances 1."""
    m, n = numerators.shape
    fit = Fit(
        Forms(np.ones(m), numerators, np.empty((0, n)), np.empty((m, 0))),
        np.array([measured]),
        np.ones((1, m)),
        np.empty(0, dtype=np.intp),
        np.empty((1, 0)),
    )
    solution = least_squares(fit, np.array([[1.0, 1.0]]), np.ones((1, 2)))
    assert solution.converged.all()
    return solution.z[0], fit


def reconcile_flows(rows: list[list[float]], measured: list[float]) -> tuple[np.ndarray, Fit]:
    """The flows of the network, of which F1 and F2 are the unknowns, reconciled."""
    numerators = np.array(rows)
    unknowns, fit = fitted(numerators, np.array(measured))
    return numerators @ unknowns, fit


def test_exchanger_with_bypass_six_flows_measured() -> None:
    # [NarasimhanJordache2000] Example 1-1. Measured values and balances confirmed in stored
    # page; reconciled values from memory. Unknown: F1 and F2, F3 = F1 - F2.
    rows = [[1, 0], [0, 1], [1, -1], [0, 1], [1, -1], [1, 0]]
    measured = [101.91, 64.45, 34.65, 64.20, 36.44, 98.88]
    reconciled, fit = reconcile_flows(rows, measured)
    assert_allclose(reconciled, [100.22, 64.50, 35.72, 64.50, 35.72, 100.22], atol=0.006)
    redundancy = curvature(fit, np.array([[100.22, 64.5]]), np.ones((1, 2))).redundancy
    assert_allclose(redundancy.sum(), 4.0, rtol=1e-12)


def test_exchanger_with_bypass_two_flows_unmeasured() -> None:
    # [NarasimhanJordache2000] Example 1-2, from memory: F3 and F4 have no meter.
    rows = [[1, 0], [0, 1], [1, -1], [1, 0]]
    reconciled, _ = reconcile_flows(rows, [101.91, 64.45, 36.44, 98.88])
    assert_allclose(reconciled, [100.49, 64.25, 36.24, 100.49], atol=0.006)


def test_thermometer_calibration_line() -> None:
    # [GUM2008] H.3, from memory: y1 + y2 (t - 20) through eleven corrections of one unknown
    # variance; without their covariance the correction at 30 would have u = 0.0073.
    t = np.array(
        [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511]
    )
    b = np.array(
        [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160]
    )
    (y1, y2), fit = fitted(np.column_stack([np.ones(11), t - 20]), b)
    at = curvature(fit, np.array([[y1, y2]]), np.ones((1, 2)))
    s = float(np.sqrt((at.residual[0] ** 2).sum() / 9))
    covariance = s**2 * at.covariance[0]
    u1, u2 = np.sqrt(np.diag(covariance))
    assert_allclose([y1, u1, s], [-0.1712, 0.0029, 0.0035], atol=6e-5)
    assert_allclose([y2, u2], [0.00218, 0.00067], atol=6e-6)
    assert_allclose(covariance[0, 1] / (u1 * u2), -0.930, atol=6e-4)
    at_30 = np.array([1.0, 10.0])
    assert_allclose(at_30 @ [y1, y2], -0.1494, atol=6e-5)
    assert_allclose(np.sqrt(at_30 @ covariance @ at_30), 0.0041, atol=6e-5)


def test_critical_values() -> None:
    # Statistical tables (Pearson and Hartley, Biometrika Tables), from memory.
    assert_allclose(chdtri([1, 2, 3, 5], 0.05), [3.841, 5.991, 7.815, 11.07], atol=6e-4)
    # Z. Sidak (1967): each of m tests at 1 - 0.95^(1/m); the quantile of the standard library.
    for tests in (1, 7, 40):
        quantile = NormalDist().inv_cdf((1 + 0.95 ** (1 / tests)) / 2)
        assert_allclose(sidak_limit(np.array([tests])), [quantile], rtol=1e-9)
    # W. Baarda (1968): non-centrality 3.24 of 5 % and 10 %, from memory 1.96 + 1.28.
    assert_allclose(DETECTABLE, 3.24, atol=5e-3)
