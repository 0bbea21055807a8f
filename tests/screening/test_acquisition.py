import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.stats import norm

from screening.acquisition import (
    condition,
    coverage_gain,
    expected_approach_eV,
    expected_calm_eV2,
    straddle_eV,
)

MEAN, SD, BEST = st.floats(1.5, 2.5), st.floats(0.01, 0.3), st.floats(0.01, 0.5)


@given(MEAN, SD, BEST)
def test_the_expected_approach_is_the_integral_over_the_belief(mean, sd, best):
    low, high = 1.95, 2.05

    def gain(y):
        away = max(low - y, y - high, 0.0)
        return max(best - away, 0.0) * norm.pdf(y, mean, sd)

    kinks = [low - best, low, high, high + best]
    ends = mean - 9 * sd, mean + 9 * sd
    inside = [k for k in kinks if ends[0] < k < ends[1]]
    expected = quad(gain, *ends, points=inside or None, limit=200)[0]
    found = expected_approach_eV([mean], [sd], (low, high), best)[0]
    assert found == pytest.approx(expected, abs=1e-6)


@given(MEAN, SD)
def test_an_approach_is_never_more_than_the_distance_left(mean, sd):
    gain = expected_approach_eV([mean], [sd], (1.95, 2.05), 0.2)[0]
    assert 0.0 <= gain <= 0.2


@given(st.floats(0.01, 0.3))
def test_the_straddle_is_largest_at_an_edge(sd):
    values = straddle_eV([1.95, 1.9, 2.0, 2.05], [sd] * 4, (1.95, 2.05))
    assert values[0] == pytest.approx(values[3])
    assert values[0] > values[1]
    assert values[0] > values[2]


def random_covariance(n, seed):
    root = np.random.default_rng(seed).normal(size=(n, n))
    return root @ root.T


@given(st.integers(2, 7), st.integers(0, 1000))
def test_conditioning_is_the_schur_complement_with_noise(n, seed):
    covariance = random_covariance(n, seed)
    noisy = covariance.copy()
    noisy[0, 0] += 0.3
    rest = np.arange(1, n)
    schur = covariance[np.ix_(rest, rest)] - np.outer(noisy[rest, 0], noisy[0, rest]) / noisy[0, 0]
    assert np.allclose(condition(covariance, 0, 0.3)[np.ix_(rest, rest)], schur)


@given(st.integers(2, 7), st.integers(0, 1000))
def test_the_expected_calm_is_what_conditioning_takes_away(n, seed):
    covariance = random_covariance(n, seed)
    watched = np.random.default_rng(seed).uniform(size=n)
    calm = expected_calm_eV2(covariance, np.full(n, 0.2), watched)
    for at in range(n):
        after = condition(covariance, at, 0.2)
        lost = watched @ (np.diag(covariance) - np.diag(after))
        assert calm[at] == pytest.approx(lost)


def test_greedy_coverage_prefers_another_group_to_a_twin():
    draws = np.random.default_rng(0).random((20_000, 3)) < [0.4, 0.4, 0.3]
    draws[:, 1] = draws[:, 0]
    first = coverage_gain(draws, np.zeros(len(draws), dtype=bool))
    assert int(np.argmax(first)) == 0
    second = coverage_gain(draws, draws[:, 0])
    assert second[1] == 0.0
    # independent chances: 0.3 of the 0.6 that is left
    assert second[2] == pytest.approx(0.18, abs=0.01)
