"""What was taken out of the feed's sample and no reading tells the flow of."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose

from core.errors import Note, Refused
from core.outlet_analysis.account import AccountProblem
from core.outlet_analysis.conversion import conversion_results
from core.outlet_analysis.estimate import Estimate
from core.outlet_analysis.feed import known_feed
from core.outlet_analysis.readings import Series
from core.outlet_analysis.reconciliation import estimate, estimate_feed
from core.streams.known import Conditions
from tests.core.outlet_analysis.plant import account, analysis_of, reactions_of, stream_of

CONTACT = reactions_of({"r1": "2 SO2 + O2 <=> 2 SO3"}, ["SO2", "O2", "N2", "H2O"])
SO2 = CONTACT.index("SO2")
H2O = CONTACT.index("H2O")


def dried_feed(**more: Any) -> Any:
    """Roaster gas analysed dry; whether it holds moisture no reading tells."""
    return stream_of(
        CONTACT,
        "feed",
        present=["SO2", "O2", "N2", "H2O"],
        analysis=analysis_of(
            CONTACT,
            "feed",
            {"SO2": (0.10, 0.001), "O2": (0.11, 0.001)},
            removed=["H2O"],
            balance="N2",
        ),
        **more,
    )


def leaving(values: dict[str, Any], removed: list[str], **more: Any) -> Any:
    return stream_of(
        CONTACT, "outlet", analysis=analysis_of(CONTACT, "outlet", values, removed=removed), **more
    )


def converter(values: dict[str, Any], removed: list[str], **more: Any) -> AccountProblem:
    return account(CONTACT, "SO2", dried_feed(**more), leaving(values, removed))


def absent(found: Estimate) -> list[Note]:
    return [note for note in found.notes if note.code == "removed-taken-as-absent"]


def test_moisture_that_dilutes_the_outlet_is_not_guessed() -> None:
    with pytest.raises(Refused) as caught:
        estimate(converter({"SO2": (0.01, 2e-4)}, ["SO3"]))
    (fault,) = caught.value.faults
    assert fault.code == "under-determined"
    text = str(fault)
    assert "the conversion of SO2" in text
    assert "H2O is removed from the sample of the feed, and no reading tells its flow" in text


def test_moisture_that_the_outlet_tells_is_estimated() -> None:
    # 100 of dry gas with 5 of water, 9 of 10 SO2 converted; SO3 out of the sample.
    total = 105 - 13.5
    values = {"SO2": (1 / total, 2e-4), "O2": (6.5 / total, 1e-3)}
    found = estimate(converter(values, ["SO3"]))
    results = conversion_results(found)
    assert_allclose(results.conversion.value, 0.9, atol=1e-9)
    assert_allclose(found.feed_flows[H2O] / found.feed_flows[SO2], 0.5, atol=1e-8)
    assert results.conversion.u > 2e-3
    assert not absent(found)
    dry = estimate(converter(values, ["SO3", "H2O"]))
    assert conversion_results(dry).conversion.u < results.conversion.u


@pytest.mark.parametrize("flow", [{}, {"total": (100.0, 1.0), "as_analysed": True}])
def test_moisture_that_matters_to_nothing_is_taken_as_absent(flow: dict[str, Any]) -> None:
    found = estimate(converter({"SO2": (0.01, 2e-4)}, ["SO3", "H2O"], **flow))
    results = conversion_results(found)
    assert_allclose(results.conversion.value, 9 / 9.85, rtol=1e-12)
    assert found.feed_flows[H2O] == found.outlet_flows[H2O] == 0
    assert found.u_of(found.account.feed_map)[H2O] == 0
    (note,) = absent(found)
    assert note.subject == ("feed", "analysis")
    assert note.facts["substance"] == "H2O"
    # As if it had never been mentioned.
    dry = dried_feed(**flow)
    dry = replace(dry, present=frozenset({SO2, CONTACT.index("O2"), CONTACT.index("N2")}))
    plain = estimate(account(CONTACT, "SO2", dry, leaving({"SO2": (0.01, 2e-4)}, ["SO3", "H2O"])))
    of = conversion_results(plain)
    assert_allclose(results.conversion.u, of.conversion.u, rtol=1e-9)
    assert results.closures is not None
    assert of.closures is not None
    assert_allclose(results.closures.ratio.value, of.closures.ratio.value, rtol=1e-9)
    assert_allclose(results.closures.into.value, of.closures.into.value, rtol=1e-9)
    assert_allclose(found.chi_square, plain.chi_square, atol=1e-12)


def test_what_the_reactions_use_up_cannot_be_absent() -> None:
    shift = reactions_of({"shift": "CO + H2O <=> CO2 + H2"}, ["CO", "H2O", "N2"])
    feed = stream_of(
        shift,
        "feed",
        total=(100.0, 1.0),
        as_analysed=True,
        present=["CO", "H2O", "N2"],
        analysis=analysis_of(shift, "feed", {"CO": (0.3, 0.003)}, removed=["H2O"], balance="N2"),
    )

    def fault_with(co: float) -> Estimate:
        values = {"CO": (co, 0.002)}
        outlet = stream_of(
            shift, "outlet", analysis=analysis_of(shift, "outlet", values, removed=["H2O"])
        )
        return estimate(account(shift, "CO", feed, outlet))

    with pytest.raises(Refused) as caught:
        fault_with(0.1)
    (fault,) = caught.value.faults
    assert fault.code == "under-determined"
    assert "leave open the flow of H2O fed and the flow of H2O leaving" in str(fault)
    assert "H2O is removed from the sample of the feed" in str(fault)
    assert "the flow of H2O, as a feed stream of its own" in str(fault.facts["further"])
    # Where nothing of it is used up, or hardly, it may well be absent.
    (note,) = absent(fault_with(0.3))
    assert note.facts["substance"] == "H2O"


def test_a_feed_alone_is_taken_without_it() -> None:
    found = estimate_feed(CONTACT, SO2, (dried_feed(total=(100.0, 1.0), as_analysed=True),))
    assert_allclose(found.feed_flows, [10, 11, 79, 0, 0], rtol=1e-12)
    (note,) = absent(found)
    assert note.facts["substance"] == "H2O"


def test_a_known_feed_lists_it_among_what_is_assumed() -> None:
    feed = dried_feed(total=(100.0, 1.0), as_analysed=True)
    known = known_feed(CONTACT, SO2, [feed], Conditions("gas", ("feed",)), batch=False)
    assert_allclose(known.stream.flows, [10, 11, 79, 0, 0], rtol=1e-12)
    assert "removed-taken-as-absent" in {note.code for note in known.assumed}
    assert "removed-taken-as-absent" not in {note.code for note in known.notes}


def test_a_total_that_counts_it_leaves_the_others_open_too() -> None:
    with pytest.raises(Refused) as caught:
        estimate_feed(CONTACT, SO2, (dried_feed(total=(100.0, 1.0)),))
    text = str(caught.value.faults[0])
    assert caught.value.faults[0].code == "under-determined"
    assert "H2O is removed from the sample of the feed" in text


def test_absent_from_both_outlet_streams_then() -> None:
    # Oleum takes up the SO3; both streams are free to hold moisture.
    gas = leaving({"SO2": (0.01, 2e-4)}, ["SO3", "H2O"])
    gas = replace(gas, present=None)
    acid = stream_of(
        CONTACT,
        "acid",
        phase="liquid",
        analysis=analysis_of(CONTACT, "acid", {"SO3": (0.99, 0.01)}, removed=["H2O"]),
        present=["SO3", "H2O"],
    )
    found = estimate(account(CONTACT, "SO2", dried_feed(), [gas, acid]))
    assert absent(found)
    assert found.stream_flows(1)[H2O] == found.stream_flows(2)[H2O] == 0


def test_in_a_series_each_sample_for_itself() -> None:
    # Oxygen tells the moisture; without it the outlet fraction of a wet sample says nothing.
    total = 105 - 13.5
    problem = converter({"SO2": (1 / total, 2e-4), "O2": (6.5 / total, 1e-3)}, ["SO3"])
    place = ("outlet", "analysis", "values", "O2")
    oxygen = Series(np.array([6.5 / total, np.nan]), np.full(2, 1e-3))
    found = estimate(replace(problem, series={place: oxygen}))
    assert set(found.failed) == {1}
    assert_allclose(found.feed_flows[0, H2O] / found.feed_flows[0, SO2], 0.5, atol=1e-8)
    # A humidity read now and then: absent where it is not.
    wet = dried_feed(flows={"H2O": (5.0, 0.1)}, total=(100.0, 1.0), as_analysed=True)
    problem = account(CONTACT, "SO2", wet, leaving({"SO2": (0.01, 2e-4)}, ["SO3", "H2O"]))
    steam = Series(np.array([5.0, np.nan, 4.0]), np.full(3, 0.1))
    found = estimate(replace(problem, series={("feed", "flows", "H2O"): steam}))
    assert not found.failed
    assert_allclose(found.feed_flows[:, H2O], [5.0, 0.0, 4.0], rtol=1e-9)
    (note,) = absent(found)
    assert "(1 of 3 samples)" in str(note)
    closures = conversion_results(found).closures
    assert closures is not None
    for k in range(3):
        kept = replace(
            problem,
            series={("feed", "flows", "H2O"): Series(steam.value[k : k + 1], steam.u[k : k + 1])},
        )
        one = conversion_results(estimate(kept)).closures
        assert one is not None
        assert_allclose(closures.ratio.value[k], one.ratio.value[0], rtol=1e-9)
