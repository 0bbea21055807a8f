import numpy as np
import pytest
from scipy.optimize import minimize_scalar

from screening.blending import BlendedRegressor, blend, blend_weight


def test_the_weight_is_the_minimum_of_the_weighted_squared_error():
    rng = np.random.default_rng(0)
    y, weights = rng.normal(size=50), rng.uniform(0.1, 1.0, 50)
    gaussian, trees = y + 0.5 * rng.normal(size=50), y + rng.normal(size=50)
    numeric = minimize_scalar(
        lambda w: weights @ (y - w * gaussian - (1 - w) * trees) ** 2, bounds=(0, 1)
    )
    assert blend_weight(y, gaussian, trees, weights) == pytest.approx(numeric.x, abs=1e-4)


def test_disagreement_widens_the_blend():
    mean, sd = blend(np.array([1.0]), np.array([2.0]), np.array([0.1]), 0.5)
    assert mean[0] == 1.5
    assert sd[0] == pytest.approx(np.hypot(0.1, 0.5))


def test_a_left_out_group_is_predicted_without_its_own_targets():
    rng = np.random.default_rng(3)
    X, groups = rng.normal(size=(60, 2)), np.repeat(np.arange(6), 10)
    y = X[:, 0] + rng.normal(size=60)
    first = BlendedRegressor(n_folds=6).fit(X, y)
    spoilt = y.copy()
    spoilt[groups == 2] += 100.0
    theta = first.gaussian_.theta_
    second = BlendedRegressor(n_folds=6).fit(X, spoilt, start=theta, max_iter=0)
    ours, theirs = first.left_out(groups), second.left_out(groups)
    out = groups == 2
    np.testing.assert_allclose(ours.gaussian[out], theirs.gaussian[out], atol=1e-8)
    np.testing.assert_array_equal(ours.trees[out], theirs.trees[out])
