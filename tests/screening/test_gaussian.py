import numpy as np
import pytest
from scipy.optimize import approx_fprime
from sklearn.gaussian_process import GaussianProcessRegressor
from sklearn.gaussian_process.kernels import RBF, ConstantKernel, Matern
from sklearn.utils.estimator_checks import parametrize_with_checks

from screening.blending import BlendedRegressor
from screening.covariance import CovarianceTerm
from screening.gaussian import GroupedGaussianProcess

FLAT = {"amplitude_spread": np.inf, "length_spread": np.inf}


# SkipTestWarning: scikit-learn announces the checks that need an optional array library.
@pytest.mark.filterwarnings("ignore::sklearn.exceptions.SkipTestWarning")
@parametrize_with_checks([GroupedGaussianProcess(), BlendedRegressor(n_folds=2)])
def test_the_regressors_pass_scikit_learns_own_checks(estimator, check):
    check(estimator)


@pytest.fixture
def sample():
    rng = np.random.default_rng(0)
    X = rng.normal(size=(40, 3))
    groups = rng.integers(0, 6, 40)
    y = np.sin(X[:, 0]) + 0.3 * X[:, 1] + 0.2 * groups + 0.1 * rng.normal(size=40)
    return np.column_stack([X, groups]), y


@pytest.mark.parametrize(
    ("smoothness", "kernel"),
    [
        ("smooth", RBF),
        ("matern 5/2", lambda lengths: Matern(lengths, nu=2.5)),
        ("matern 3/2", lambda lengths: Matern(lengths, nu=1.5)),
    ],
)
def test_likelihood_mean_and_sd_equal_scikit_learns(sample, smoothness, kernel):
    X, y = sample
    noise = np.linspace(0.05, 0.2, len(y))
    term = CovarianceTerm("all", (0, 1, 2), smoothness=smoothness, **FLAT)
    theta = np.log([1.3, 0.9, 1.7, 2.5, 1e-6])
    ours = GroupedGaussianProcess([term], noise_spread=np.inf, max_iter=0, start=theta)
    ours.fit(X, y, noise_sd=noise)
    theirs = GaussianProcessRegressor(
        ConstantKernel(1.3**2) * kernel([0.9, 1.7, 2.5]), alpha=noise**2, optimizer=None
    ).fit(X[:, :3], y)
    assert ours.log_posterior_ == pytest.approx(theirs.log_marginal_likelihood_value_, rel=1e-8)
    new = np.random.default_rng(1).normal(size=(15, 4))
    mean, sd = ours.predict(new, return_std=True)
    their_mean, their_sd = theirs.predict(new[:, :3], return_std=True)
    np.testing.assert_allclose(mean, their_mean, atol=1e-8)
    np.testing.assert_allclose(sd, their_sd, atol=1e-7)


@pytest.mark.parametrize("smoothness", ["smooth", "matern 5/2", "matern 3/2", "linear"])
def test_the_analytic_gradient_equals_finite_differences(sample, smoothness):
    X, y = sample
    terms = [
        CovarianceTerm("a", (0, 1, 2), smoothness=smoothness),
        CovarianceTerm("b", (2,), labels=(3,), scale=1),
        CovarianceTerm("c", (0, 1), shared_length=True),
    ]
    model = GroupedGaussianProcess(terms).fit(X, y)
    centre, spread = model._prior()
    theta = centre + 0.2
    numeric = approx_fprime(theta, lambda t: model._objective(t, centre, spread)[0], 1e-6)
    analytic = model._objective(theta, centre, spread)[1]
    np.testing.assert_allclose(analytic, numeric, rtol=1e-4, atol=1e-3)


def test_leaving_a_group_out_in_closed_form_equals_refitting_without_it(sample):
    X, y = sample
    terms = [CovarianceTerm("a", (0, 1)), CovarianceTerm("b", labels=(3,)), CovarianceTerm("l")]
    model = GroupedGaussianProcess(terms).fit(X, y, noise_sd=np.full(len(y), 0.1))
    mean, sd = model.leave_group_out(X[:, 3])
    for group in np.unique(X[:, 3]):
        out = X[:, 3] == group
        refit = GroupedGaussianProcess(terms, start=model.theta_, max_iter=0)
        refit.fit(X[~out], y[~out], noise_sd=np.full(np.sum(~out), 0.1))
        expected_mean, expected_sd = refit.predict(X[out], return_std=True)
        np.testing.assert_allclose(mean[out], expected_mean, atol=1e-9)
        np.testing.assert_allclose(sd[out], expected_sd, atol=1e-8)


def test_an_unknown_label_shares_nothing_but_widens(sample):
    X, y = sample
    terms = [CovarianceTerm("a", (0, 1)), CovarianceTerm("b", labels=(3,))]
    model = GroupedGaussianProcess(terms).fit(X, y)
    known, unknown = X[:5].copy(), X[:5].copy()
    unknown[:, 3] = -1
    assert (
        model.predict(unknown, return_std=True)[1] > model.predict(known, return_std=True)[1]
    ).all()


def test_training_is_deterministic(sample):
    X, y = sample
    first, second = (GroupedGaussianProcess().fit(X, y) for _ in range(2))
    np.testing.assert_array_equal(first.theta_, second.theta_)
