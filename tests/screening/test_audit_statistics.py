import numpy as np
import pandas as pd
import pytest
from scipy.stats import binomtest, kstest, norm

from screening.audit_statistics import (
    binomial_band,
    cluster_bootstrap,
    group_means,
    perfect_rows,
    pit_distance,
    score_rows,
)
from screening.audited import audited_figures, figure_name
from screening.calibration import LEVELS
from screening.left_out import predictive_of


def table(n_groups=12, n_rows=6, sd=0.2, bias=0.0, seed=0):
    """Return left-out predictions whose errors are normal with the stated deviation."""
    rng = np.random.default_rng(seed)
    n = n_groups * n_rows
    frame = pd.DataFrame({"group": [f"m{i:02d}" for i in range(n_groups)]}).loc[
        np.repeat(range(n_groups), n_rows)
    ]
    frame = frame.reset_index(drop=True)
    frame["cluster"], frame["vote"] = frame["group"], 1.0
    frame["track"], frame["split"], frame["state"] = "emission", "materials", "new"
    frame["predicted_eV"] = rng.uniform(1.0, 3.0, n)
    frame["observed_eV"] = frame["predicted_eV"] + bias + sd * rng.normal(size=n)
    for level in LEVELS:
        half = 0.2 * norm.ppf(0.5 + level / 2.0)
        frame[f"low_{100 * level:.0f}_eV"] = frame["predicted_eV"] - half
        frame[f"high_{100 * level:.0f}_eV"] = frame["predicted_eV"] + half
    predictive, _ = predictive_of(frame)
    frame["pit"] = predictive.cdf(frame["observed_eV"].to_numpy())
    frame["crps_eV"] = predictive.crps(frame["observed_eV"].to_numpy())
    frame["family"] = np.where(frame["group"] < "m06", "one", "other")
    frame["baseline: far"] = frame["predicted_eV"] + 1.0
    return frame


@pytest.mark.parametrize(("hits", "n"), [(0, 9), (7, 10), (30, 30), (1, 3)])
def test_the_band_is_the_exact_binomial_one(hits, n):
    exact = binomtest(hits, n).proportion_ci(0.9, method="exact")
    np.testing.assert_allclose(binomial_band(hits / n, n), exact, atol=1e-9)


def test_the_distance_of_the_transform_is_kolmogorovs():
    pit = np.random.default_rng(0).uniform(size=50) ** 2
    expected = kstest(pit, "uniform").statistic
    assert pit_distance(pit, np.ones(50)) == pytest.approx(expected)


def test_a_bootstrap_of_groups_agrees_with_the_central_limit():
    frame = table(n_groups=200, n_rows=2)
    groups = group_means((frame["predicted_eV"] - frame["observed_eV"]).abs(), frame)
    low, high = cluster_bootstrap(groups, frame)
    half = 1.645 * groups.std() / np.sqrt(len(groups))
    # 2000 draws leave some per cent of scatter in the ends
    assert high - low == pytest.approx(2.0 * half, rel=0.1)
    assert low < groups.mean() < high


def test_no_interval_is_drawn_from_fewer_than_five_clusters():
    frame = table(n_groups=4)
    groups = group_means(frame["crps_eV"], frame)
    assert np.isnan(cluster_bootstrap(groups, frame)).all()


def test_a_perfect_model_scores_as_its_simulation_says():
    frame = table(n_groups=60)
    predictive, _ = predictive_of(frame)
    ideal = {row["figure"]: row for row in perfect_rows(frame, predictive)}
    assert ideal["perfect model: mean_absolute_error_eV"]["value"] == pytest.approx(
        0.2 * np.sqrt(2.0 / np.pi), rel=0.02
    )
    # E[CRPS] of a normal is its deviation over sqrt(pi)
    assert ideal["perfect model: crps_eV"]["value"] == pytest.approx(0.2 / np.sqrt(np.pi), rel=0.02)
    for level in LEVELS:
        share = ideal[f"perfect model: coverage_{100 * level:.0f}"]["value"]
        assert share == pytest.approx(level, abs=0.01)


def test_an_overconfident_model_falls_out_of_the_perfect_models_band():
    frame = table(n_groups=60, sd=0.5)
    predictive, _ = predictive_of(frame)
    ideal = {row["figure"]: row for row in perfect_rows(frame, predictive)}
    own = {row["figure"]: row for row in score_rows(frame, has_intervals=True)}
    for name in ("mean_absolute_error_eV", "crps_eV", "interval_score_90_eV", "pit_distance"):
        assert own[name]["value"] > ideal[f"perfect model: {name}"]["high"], name
    assert own["coverage_90"]["value"] < ideal["perfect model: coverage_90"]["low"]


def test_root_mean_square_error_gives_every_group_one_vote():
    frame = table(n_groups=6)
    error = (frame["predicted_eV"] - frame["observed_eV"]) ** 2
    expected = np.sqrt(error.groupby(frame["group"]).mean().mean())
    rows = {row["figure"]: row for row in score_rows(frame, has_intervals=True)}
    assert rows["root_mean_square_error_eV"]["value"] == pytest.approx(expected)


def test_one_worker_and_two_give_the_same_figures():
    both = pd.concat([table(), table(seed=1).assign(split="families")])
    pd.testing.assert_frame_equal(audited_figures(both, n_jobs=2), audited_figures(both))


def test_a_baseline_that_is_one_electronvolt_off_is_named_with_its_lead():
    figures = audited_figures(table()).set_index("figure")
    lead = figures.loc[figure_name("lead_eV over baseline: far", "emission", "materials")]
    assert 0.5 < lead["low"] < lead["value"] < lead["high"] < 1.2
    parts = [name for name in figures.index if name.endswith("family one")]
    assert figure_name("coverage_90", "emission", "materials", "family one") in parts
