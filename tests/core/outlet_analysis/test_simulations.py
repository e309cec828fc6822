"""What uncertainties, tests and redundancies promise, over thousands of seeded samples."""

from __future__ import annotations

from tests.core.outlet_analysis.full_runs import coverage, detection, singles
from tests.core.outlet_analysis.redundant_accounts import ACCOUNTS


def test_intervals_hold_the_truth_as_often_as_they_say() -> None:
    # 10,000 samples of each account: the binomial spread is 0.2 %.
    found = coverage()
    assert len(found) == len(ACCOUNTS) >= 6
    for of in found:
        assert len(of.intervals) >= 4, of.account
        assert all(0.94 <= held <= 0.96 for held in of.intervals), of
        assert 0.04 <= of.above_limit <= 0.06, of
        assert 0.045 <= of.reading_tests <= 0.055, of


def test_gross_errors_are_found_as_often_as_redundancy_says() -> None:
    # 5,000 single errors of 0 to 10 u in any reading; the binomial spread is 0.7 %.
    found = detection()
    assert set(found) == {"single test", "all tests together", "chi-square"}
    for test, of in found.items():
        assert abs(of.found - of.predicted) <= 0.02, test
        assert 0.3 < of.predicted < 0.7, test


def test_samples_of_random_series_are_answered_as_they_are_alone() -> None:
    of = singles(40)
    assert of.compared > 130
    assert of.failed > 50
    assert not of.disagreed
    assert of.moved <= 1e-10
    assert of.shuffled <= 1e-10
    assert of.conversion <= 1e-10
    assert of.u <= 1e-9
