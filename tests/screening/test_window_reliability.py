import numpy as np
import pandas as pd
import pytest
from scipy.stats import norm

from screening.calibration import LEVELS
from screening.predictive import Predictive
from screening.window_reliability import WIDTHS_eV, ask_windows, draw_truths, reliability


def predictive(n, sd=0.1, seed=0):
    half = np.outer(np.full(n, sd), norm.ppf(0.5 + np.array(LEVELS) / 2.0))
    return Predictive(np.random.default_rng(seed).uniform(1.0, 3.0, n), half, LEVELS)


def test_windows_do_not_depend_on_what_was_observed():
    model = predictive(20)
    low = ask_windows(model, model.mean)
    high = ask_windows(model, model.mean + 0.05)
    order = [np.lexsort((w.low, w.row, (w.high - w.low).round(6))) for w in (low, high)]
    np.testing.assert_array_equal(low.row[order[0]], high.row[order[1]])
    np.testing.assert_allclose(low.chance[order[0]], high.chance[order[1]], atol=1e-12)


def test_windows_of_a_width_share_out_the_whole_chance_and_hold_the_truth_once():
    model = predictive(30)
    windows = ask_windows(model, model.mean)
    width = (windows.high - windows.low).round(6)
    for wanted in WIDTHS_eV:
        of_width = windows.take(width == wanted)
        hits = np.bincount(of_width.row, of_width.hits(model.mean), minlength=30)
        chance = np.bincount(of_width.row, of_width.chance, minlength=30)
        np.testing.assert_array_equal(hits, 1)
        # windows with a chance below a hundredth are not asked about
        assert (chance > 0.9).all()
        assert (chance <= 1.0 + 1e-9).all()


def test_a_perfect_model_lies_in_its_band_and_an_overconfident_one_does_not():
    model = predictive(400)
    groups = pd.Series(np.arange(400))
    truth = draw_truths(predictive(400), groups, shared=False, n_draws=1)[:, 0]
    bins, scores = reliability(model, truth, groups, np.ones(400))
    inside = bins["observed"].between(bins["independent_low"], bins["independent_high"])
    # 95 % bands: of ten bins, three or more outside happen once in a hundred perfect models
    assert (~inside).sum() <= 2
    narrow = Predictive(model.mean, model.half / 4.0, LEVELS)
    spoilt, worse = reliability(narrow, truth, groups, np.ones(400))
    last = spoilt.iloc[-1]
    assert last["observed"] < last["independent_low"]
    assert worse.loc["brier_score", "value"] > worse.loc["brier_score", "independent_high"]
    assert worse.loc["observed_hits", "value"] < worse.loc["observed_hits", "perfect"]
    assert scores.loc["brier_score", "value"] < worse.loc["brier_score", "value"]


def test_rows_that_err_together_widen_the_band():
    model = predictive(100)
    groups = pd.Series(np.arange(100) // 10)
    bins, _ = reliability(model, model.mean, groups, np.ones(100))
    shared = bins["shared_high"] - bins["shared_low"]
    assert (shared.mean()) > (bins["independent_high"] - bins["independent_low"]).mean()
    assert bins["n_groups"].max() == 10


def test_a_group_has_one_vote_however_many_rows_it_has():
    model = predictive(2)
    twice = Predictive(model.mean[[0, 1, 1]], model.half[[0, 1, 1]], LEVELS)
    truth = model.mean + 0.02
    alone, _ = reliability(model, truth, pd.Series(["a", "b"]), np.array([1.0, 1.0]))
    weights = np.array([1.0, 0.5, 0.5])
    both, _ = reliability(twice, truth[[0, 1, 1]], pd.Series(["a", "b", "b"]), weights)
    np.testing.assert_allclose(both["observed"], alone["observed"])
    np.testing.assert_allclose(both["predicted"], alone["predicted"])
    assert both["n_predictions"].sum() > alone["n_predictions"].sum()


def test_the_expected_brier_score_of_a_perfect_model_is_that_of_its_chances():
    model = predictive(200)
    windows = ask_windows(model, model.mean)
    _, scores = reliability(model, model.mean, pd.Series(np.arange(200)), np.ones(200))
    expected = np.mean(windows.chance * (1.0 - windows.chance))
    assert scores.loc["brier_score", "perfect"] == pytest.approx(expected)
    row = scores.loc["brier_score"]
    assert row["independent_low"] < expected < row["independent_high"]
