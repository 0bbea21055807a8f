import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.stats import norm

from screening.calibration import LEVELS, GroupCalibration
from screening.predictive import Predictive, interval_score

WIDTHS = st.lists(st.floats(0.01, 1.0), min_size=3, max_size=3).map(
    lambda steps: np.cumsum(steps).tolist()
)


def normal(mean, sd):
    half = np.outer(sd, norm.ppf(0.5 + np.array(LEVELS) / 2.0))
    return Predictive(np.asarray(mean, dtype=float), half, LEVELS)


@given(st.floats(-3.0, 3.0), st.floats(0.05, 2.0), st.floats(-4.0, 4.0))
def test_the_ranked_probability_score_of_a_normal_equals_the_closed_form(mean, sd, observed):
    # Gneiting et al., Mon. Weather Rev. 133, 1098 (2005), equation 5 (from memory)
    z = (observed - mean) / sd
    closed = sd * (z * (2.0 * norm.cdf(z) - 1.0) + 2.0 * norm.pdf(z) - 1.0 / np.sqrt(np.pi))
    found = normal([mean], [sd]).crps(np.array([observed]))[0]
    assert found == pytest.approx(closed, rel=1e-6, abs=1e-8)


@given(WIDTHS, st.floats(-5.0, 5.0))
def test_the_ranked_probability_score_equals_its_integral(half, observed):
    one = Predictive(np.zeros(1), np.array([half]), LEVELS)

    def squared(x):
        return float(one.cdf(np.array([x]))[0] - (x >= observed)) ** 2

    nodes = sorted({observed, 0.0, *half, *(-width for width in half)})
    edges = [min(nodes) - 12.0 * half[-1], *nodes, max(nodes) + 12.0 * half[-1]]
    whole = sum(quad(squared, a, b)[0] for a, b in itertools.pairwise(edges))
    assert one.crps(np.array([observed]))[0] == pytest.approx(whole, rel=1e-5, abs=1e-7)


@given(WIDTHS, st.floats(-4.0, 4.0), st.floats(-4.0, 4.0))
def test_the_distribution_is_that_of_the_calibration(half, mean, value):
    calibration = GroupCalibration.from_factors(dict(zip(LEVELS, half, strict=True)), 30)
    one = Predictive(np.array([mean]), np.array([half]), LEVELS)
    expected = calibration.cdf(np.array([value]), mean, 1.0)
    np.testing.assert_allclose(one.cdf(np.array([value])), expected, atol=1e-6)


@given(WIDTHS, st.floats(0.001, 0.999))
def test_quantile_and_distribution_are_inverse(half, chance):
    one = Predictive(np.zeros(1), np.array([half]), LEVELS)
    assert one.cdf(one.quantile(np.array([chance])))[0] == pytest.approx(chance, abs=1e-6)


def test_intervals_hold_their_level():
    one = Predictive(np.ones(2), np.array([[0.1, 0.2, 0.4], [0.2, 0.3, 0.9]]), LEVELS)
    for at, level in enumerate(LEVELS):
        inside = one.chance_between(one.mean - one.half[:, at], one.mean + one.half[:, at])
        np.testing.assert_allclose(inside, level, atol=1e-6)


def test_the_transform_of_draws_from_the_distribution_is_uniform():
    rng = np.random.default_rng(0)
    many = Predictive(np.zeros(5000), np.tile([0.2, 0.7, 0.8], (5000, 1)), LEVELS)
    pit = many.cdf(many.quantile(rng.uniform(size=5000)))
    ranks = (np.arange(5000) + 0.5) / 5000
    # Kolmogorov's distance exceeds 1.95 / sqrt(n) once in a thousand samples.
    assert np.abs(np.sort(pit) - ranks).max() < 1.95 / np.sqrt(5000)


@given(st.floats(0.05, 0.95))
def test_no_interval_scores_better_on_average_than_the_true_one(level):
    # proper: Gneiting and Raftery, J. Am. Stat. Assoc. 102, 359 (2007) (from memory)
    truth = norm.ppf((np.arange(20000) + 0.5) / 20000)
    z = norm.ppf(0.5 + level / 2.0)
    true = interval_score(truth, -z, z, level).mean()
    for wrong in (0.8 * z, 1.25 * z):
        assert true <= interval_score(truth, -wrong, wrong, level).mean() + 1e-6
