"""Agreement of two records: false alarms, power, corrections."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy import special, stats

from rbsim.series.agreement import DIFFERENT, EQUAL, UNDECIDED, compare_estimates, compare_records, holm
from rbsim.series.correlation import correlation_time
from rbsim.series.estimate import Estimate, unknown
from rbsim.series.excursions import excursion_rate

NAMES = ("mean", "rms", "skewness", "flatness")


def pairs(first, second):
    return [compare_records(x, y, (1.0, 1.0)) for x, y in zip(first, second, strict=True)]


def named(agreement, quantity):
    return next(c for c in agreement.comparisons if c.quantity == quantity)


def estimate(mean, error, freedom=30.0):
    width = float(stats.t.ppf(0.975, freedom)) * error
    return Estimate(mean, error, width, 1.0, freedom, 100, freedom, "test")


@pytest.mark.parametrize(("phi", "samples"), [(0.0, 100), (0.5, 200), (0.8, 500), (0.9, 1000)])
def test_equal_records_give_at_most_7_percent_false_alarms(autoregressive, phi, samples):
    found = pairs(autoregressive(phi, samples, 600, seed=1), autoregressive(phi, samples, 600, seed=2))
    assert np.mean([a.differs for a in found]) <= 0.07
    # every single test at its own 5 %, which 600 pairs know to a standard error of 1 %; three are allowed
    alone = np.mean([[c.p_value < 0.05 for c in a.comparisons] for a in found], axis=0)
    assert np.all(alone <= 0.08)


def test_equal_records_of_other_length_and_memory_are_not_told_apart(autoregressive):
    short = autoregressive(0.3, 300, 400, seed=4)
    assert np.mean([a.differs for a in pairs(autoregressive(0.9, 2500, 400, seed=3), short)]) <= 0.07


def test_a_tenth_more_rms_is_found(autoregressive):
    found = pairs(autoregressive(0.8, 12000, 60, seed=5), 1.1 * autoregressive(0.8, 12000, 60, seed=6))
    assert np.mean([named(a, "rms").verdict == DIFFERENT for a in found]) > 0.9
    assert np.mean([named(a, "mean").verdict == DIFFERENT for a in found]) < 0.07


def test_a_shifted_mean_is_found(autoregressive):
    found = pairs(autoregressive(0.8, 4000, 100, seed=7), autoregressive(0.8, 4000, 100, seed=8) + 0.4)
    assert np.mean([named(a, "mean").verdict == DIFFERENT for a in found]) > 0.9
    assert found[0].verdict == "The records differ in mean more than chance."


def test_skewness_and_heavy_tails_are_found(autoregressive):
    gaussian = autoregressive(0.8, 16000, 25, seed=9)
    uniform = special.ndtr(autoregressive(0.8, 16000, 25, seed=10))
    skewed = pairs(gaussian, special.gammaincinv(9.0, uniform))
    heavy = pairs(gaussian, -np.sign(uniform - 0.5) * np.log1p(-2.0 * np.abs(uniform - 0.5)))
    assert np.mean([named(a, "skewness").verdict == DIFFERENT for a in skewed]) > 0.9
    assert np.mean([named(a, "flatness").verdict == DIFFERENT for a in heavy]) > 0.9


def test_the_detectable_difference_is_detectable(autoregressive):
    found = pairs(autoregressive(0.5, 1000, 300, seed=11), autoregressive(0.5, 1000, 300, seed=12))
    far = [abs(c.difference) > c.detectable for a in found for c in a.comparisons if c.quantity == "mean"]
    assert np.mean(far) <= 0.075


def test_other_statistics_compare_too(autoregressive):
    x, y = autoregressive(0.9, 8000, 1, seed=13)[0], autoregressive(0.5, 8000, 1, seed=14)[0]
    found = compare_estimates(
        {
            "correlation_time": (correlation_time(x, 1.0), correlation_time(y, 1.0)),
            "excursion rate": (excursion_rate(x, 1.0, "upper"), excursion_rate(y, 1.0, "upper")),
        }
    )
    assert [c.verdict for c in found.comparisons] == [DIFFERENT, DIFFERENT]


def test_correlation_times_of_equal_records_agree(autoregressive):
    x, y = autoregressive(0.8, 2000, 400, seed=15), autoregressive(0.8, 2000, 400, seed=16)
    alarms = [
        compare_estimates({"correlation_time": (correlation_time(a, 1.0), correlation_time(b, 1.0))}).differs
        for a, b in zip(x, y, strict=True)
    ]
    assert np.mean(alarms) <= 0.07


def test_excursion_rates_of_equal_records_agree(smooth):
    x, y = smooth(4000, 300, seed=17), smooth(4000, 300, seed=18)
    alarms = [
        compare_estimates(
            {"rate": (excursion_rate(a, 1.0, "upper"), excursion_rate(b, 1.0, "upper"))}
        ).differs
        for a, b in zip(x, y, strict=True)
    ]
    assert np.mean(alarms) <= 0.07


def test_the_p_value_is_welchs():
    x, y = np.random.default_rng(19).standard_normal((2, 40))
    a = estimate(x.mean(), x.std(ddof=1) / math.sqrt(40), 39.0)
    b = estimate(y[:15].mean(), y[:15].std(ddof=1) / math.sqrt(15), 14.0)
    found = compare_estimates({"anything": (a, b)}).comparisons[0]
    assert found.p_value == pytest.approx(stats.ttest_ind(x, y[:15], equal_var=False).pvalue, rel=1e-9)
    assert found.difference == pytest.approx(y[:15].mean() - x.mean())


@pytest.mark.parametrize(
    ("quantity", "first", "second", "scale"),
    [
        ("rms", (1.0, 0.1), (2.0, 0.2), lambda v: (math.log(v), 1.0 / v)),
        ("rms", (1.0, 0.2), (2.0, 0.1), lambda v: (math.log(v), 1.0 / v)),
        ("correlation_time", (1.0, 0.3), (2.0, 0.2), lambda v: (math.log(v), 1.0 / v)),
        ("flatness", (3.0, 0.2), (5.0, 0.8), lambda v: (1.0 / (v - 1.0), 1.0 / (v - 1.0) ** 2)),
        ("flatness", (3.0, 0.4), (4.0, 0.2), lambda v: (1.0 / (v - 1.0), 1.0 / (v - 1.0) ** 2)),
    ],
)
def test_uneven_statistics_take_the_larger_p_value_of_two_scales(quantity, first, second, scale):
    def p_value(a, b, slope_a=1.0, slope_b=1.0):
        return 2 * stats.norm.sf(abs(a - b) / math.hypot(slope_a * first[1], slope_b * second[1]))

    (a, slope_a), (b, slope_b) = scale(first[0]), scale(second[0])
    expected = max(p_value(first[0], second[0]), p_value(a, b, slope_a, slope_b))
    pair = (estimate(*first, 1e9), estimate(*second, 1e9))
    assert compare_estimates({quantity: pair}).comparisons[0].p_value == pytest.approx(expected, rel=1e-6)


def test_holm_steps_down():
    assert holm([0.01, 0.04, 0.03, 0.005]) == pytest.approx([0.03, 0.06, 0.06, 0.02])
    assert holm([0.9, 0.8]) == [1.0, 1.0]
    assert holm([]) == []


def test_one_strong_difference_passes_where_two_weak_ones_fail():
    weak, strong = (estimate(0.0, 1.0), estimate(2.9, 1.0)), (estimate(0.0, 1.0), estimate(9.0, 1.0))
    alone = compare_estimates({"a": weak})
    together = compare_estimates({"a": weak, "b": strong, "c": weak})
    assert alone.comparisons[0].verdict == DIFFERENT
    assert [c.verdict for c in together.comparisons] == [EQUAL, DIFFERENT, EQUAL]


def test_short_records_are_undecided():
    ramp = np.linspace(0.0, 1.0, 50)
    found = compare_records(ramp, 100.0 + ramp, (1.0, 1.0))
    assert all(c.verdict == UNDECIDED for c in found.comparisons)
    assert not found.differs
    assert found.verdict == "The records are too short to compare mean, rms, skewness, flatness."


def test_constant_records_differ_or_not_exactly():
    same = compare_estimates({"mean": (estimate(1.0, 0.0), estimate(1.0, 0.0))})
    other = compare_estimates({"mean": (estimate(1.0, 0.0), estimate(1.1, 0.0))})
    assert (same.comparisons[0].p_value, other.comparisons[0].p_value) == (1.0, 0.0)
    still = compare_estimates({"rms": (estimate(0.0, 0.0), estimate(1.0, 0.1))})
    assert still.differs
    assert same.verdict == "The records do not differ in mean more than chance."


def test_an_unknown_estimate_is_compared_with_nothing():
    found = compare_estimates({"mean": (unknown(1.0, 5, "short"), estimate(9.0, 0.1))}).comparisons[0]
    assert (found.p_value, found.verdict, found.detectable) == (1.0, UNDECIDED, math.inf)


@pytest.mark.parametrize("level", [0.0, 1.0, math.nan])
def test_a_wrong_level_is_refused(level):
    with pytest.raises(ValueError, match="must lie between 0 and 1"):
        compare_estimates({}, level)


RECORD = arrays(np.float64, st.integers(2, 40), elements=st.floats(-1e70, 1e70))


@settings(max_examples=60, deadline=None)
@given(RECORD, RECORD)
def test_no_finite_pair_gives_nan(first, second):
    for c in compare_records(first, second, (1.0, 2.0)).comparisons:
        assert 0.0 <= c.p_value <= c.adjusted_p_value <= 1.0
        assert not math.isnan(c.difference)
        assert not math.isnan(c.detectable)


@settings(max_examples=30, deadline=None)
@given(seed=st.integers(0, 10**6), shift=st.floats(-20, 20), factor=st.floats(0.01, 100))
def test_units_do_not_matter(seed, shift, factor):
    x, y = np.random.default_rng(seed).gamma(4.0, size=(2, 100))
    a = compare_records(x, y, (1.0, 1.0))
    b = compare_records(shift + factor * x, shift + factor * y, (1.0, 1.0))
    assert [c.p_value for c in a.comparisons] == pytest.approx([c.p_value for c in b.comparisons], abs=1e-5)
