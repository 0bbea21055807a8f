import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from mapie.regression import SplitConformalRegressor
from scipy.stats import binom
from sklearn.dummy import DummyRegressor

from features.errors import CalibrationError
from screening.calibration import LEVELS, GroupCalibration, group_weights


def test_coverage_on_a_new_group_is_at_least_nominal():
    # 400 repetitions of 19 training groups and one new one; groups share an offset. A calibrated
    # 90 % interval would fall below the bound in one run of a thousand (binomial tail).
    rng = np.random.default_rng(0)
    hits = 0
    for _ in range(400):
        offsets = rng.normal(size=20)
        residual = offsets.repeat(5) + 0.3 * rng.normal(size=100)
        groups = np.arange(20).repeat(5)
        train = groups < 19
        calibration = GroupCalibration().fit(residual[train], np.ones(95), groups[train])
        hits += abs(residual[-1]) <= calibration.factor(0.9)
    assert hits >= binom.ppf(0.001, 400, 0.9)


def test_row_wise_calibration_of_grouped_data_undercovers_a_new_group():
    # One group holds most rows, so a row-wise 90 % quantile is about that group's own offset. If
    # it covered a new group at 90 %, fewer hits than the bound would be a chance of 1 in 1000.
    rng = np.random.default_rng(0)
    hits = 0
    for _ in range(400):
        residual = rng.normal(size=4).repeat([300, 5, 5, 5])
        rows = GroupCalibration((0.9,)).fit(residual, np.ones(315), np.arange(315))
        hits += abs(rng.normal()) <= rows.factor(0.9)
    assert hits < binom.ppf(0.001, 400, 0.9)


@pytest.mark.parametrize(("n_groups", "refused"), [(8, (0.9,)), (9, ()), (3, (0.8, 0.9))])
def test_a_level_needs_enough_groups(n_groups, refused):
    calibration = GroupCalibration(state="new").fit(
        np.arange(n_groups) + 1.0, np.ones(n_groups), np.arange(n_groups)
    )
    assert calibration.refused_ == refused
    for level in refused:
        with pytest.raises(CalibrationError, match=r"at least [49] left-out groups, found"):
            calibration.factor(level)


def test_one_group_supports_only_the_median_level():
    assert GroupCalibration().fit([1.0], [1.0], ["a"]).factors_ == {0.5: 1.0}


def test_the_chance_agrees_with_the_interval_at_every_level():
    rng = np.random.default_rng(2)
    calibration = GroupCalibration().fit(rng.standard_t(3, 300), np.ones(300), np.arange(300))
    for level in LEVELS:
        low, high = calibration.interval(np.array([1.0]), np.array([0.2]), level)
        chance = calibration.chance_between(low, high, np.array([1.0]), np.array([0.2]))
        assert float(chance[0]) == pytest.approx(level, abs=1e-9)


@given(st.lists(st.floats(0.01, 10.0), min_size=9, max_size=40), st.floats(0.1, 10.0))
def test_intervals_follow_the_unit(residuals, unit):
    groups = np.arange(len(residuals))
    one = GroupCalibration().fit(residuals, np.ones(len(residuals)), groups)
    other = GroupCalibration().fit(
        unit * np.array(residuals), unit * np.ones(len(residuals)), groups
    )
    assert other.factor(0.9) == pytest.approx(one.factor(0.9), rel=1e-9)


@given(st.lists(st.floats(0.0, 5.0), min_size=9, max_size=30))
def test_the_calibrated_distribution_never_falls(residuals):
    n = len(residuals)
    calibration = GroupCalibration().fit(residuals, np.ones(n), np.arange(n))
    values = calibration.cdf(np.linspace(-30.0, 30.0, 301), 0.0, 1.0)
    assert (np.diff(values) >= -1e-12).all()
    assert values[150] == pytest.approx(0.5)


def test_a_group_has_one_vote_however_many_rows_it_holds():
    few = GroupCalibration().fit(np.arange(1.0, 11.0), np.ones(10), np.arange(10))
    many_residuals = np.concatenate([np.arange(1.0, 10.0), np.full(1000, 10.0)])
    many_groups = np.concatenate([np.arange(9), np.full(1000, 9)])
    many = GroupCalibration().fit(many_residuals, np.ones(1009), many_groups)
    assert few.factors_ == many.factors_


def test_weights_sum_to_one_in_every_group():
    weights = group_weights(["a", "b", "b"], [2.0, 1.0, 3.0])
    np.testing.assert_allclose(weights, [1.0, 0.25, 0.75])


def test_what_was_learned_can_be_rebuilt():
    fitted = GroupCalibration().fit(np.arange(1.0, 21.0), np.ones(20), np.arange(20))
    rebuilt = GroupCalibration.from_factors(fitted.factors_, fitted.n_groups_)
    z = np.linspace(-3, 3, 7)
    np.testing.assert_array_equal(rebuilt.normal_score(z), fitted.normal_score(z))


@pytest.mark.parametrize("n_rows", [19, 60, 333])
def test_on_exchangeable_rows_the_intervals_are_those_of_mapie(n_rows):
    # One row a group is split conformal prediction with absolute residuals.
    residual = np.random.default_rng(n_rows).standard_t(3, size=n_rows)
    nothing = DummyRegressor(strategy="constant", constant=0.0).fit([[0.0]], [0.0])
    columns = np.zeros((n_rows, 1))
    other = SplitConformalRegressor(nothing, confidence_level=list(LEVELS), prefit=True)
    _, intervals = other.conformalize(columns, residual).predict_interval(columns[:1])
    own = GroupCalibration().fit(residual, np.ones(n_rows), np.arange(n_rows))
    for at, level in enumerate(LEVELS):
        ends = [end[0] for end in own.interval(np.zeros(1), np.ones(1), level)]
        np.testing.assert_allclose(intervals[0, :, at], ends, rtol=1e-12)
