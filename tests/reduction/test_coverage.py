"""Simulated tests with known truth: do the intervals hold it as often as they say?"""

from __future__ import annotations

from coverage_trials import automatic_alone, declared_errors


def test_95_percent_intervals_hold_the_truth_with_121_taps() -> None:
    """600 tests, errors drawn as declared, automatic terms off: 93-98 % of each coefficient."""
    held = declared_errors(tests=600, taps=121, rearmost=1.0, automatic=False, seed=5)
    for name, share in held.items():
        assert 0.93 <= share <= 0.98, (name, share)


def test_95_percent_intervals_hold_the_truth_with_41_taps_and_automatic_terms() -> None:
    held = declared_errors(tests=600, taps=41, rearmost=0.97, automatic=True, seed=6)
    for name, share in held.items():
        assert share >= 0.93, (name, share)


def test_automatic_terms_alone_hold_the_truth_of_exact_flows() -> None:
    """100 flows without declared errors (the study has more): 90 % of cl and cm, 85 % of pressure drag, and U
    under four rms errors."""
    held, ratio = automatic_alone(taps=(25, 43))
    assert held["cl"] >= 0.90
    assert held["cm"] >= 0.90
    assert held["cd_pressure"] >= 0.85
    assert max(ratio.values()) < 4.0, ratio
