import numpy as np
import pandas as pd
import pytest

from screening.candidates import pair_frame
from screening.laboratory import join_results, size_bias
from screening.measurements import measured_rows

MATERIALS = ["CdSe", "CdSe", "PbSe", "CdTe", "InP", "CdS"]


def results(model, bias, seed=0, materials=MATERIALS, shift_eV=0.0, **columns):
    """Return what an invented laboratory reports whose sizes are off by a share."""
    rng = np.random.default_rng(seed)
    true_nm = rng.uniform(2.5, 6.0, len(materials))
    frame = pair_frame(pd.DataFrame({"material": materials, "diameter_nm": true_nm}))
    gap = model.predict(frame)["optical_gap_eV"].to_numpy() + rng.normal(0, 0.02, len(materials))
    return pd.DataFrame(
        {
            "material": materials,
            "diameter_nm": true_nm * (1.0 + bias),
            "diameter_uncertainty_nm": 0.01 * true_nm,
            "energy_eV": gap + shift_eV,
            "energy_sd_eV": 0.02,
            "energy_kind": "absorption",
            **columns,
        }
    )


@pytest.mark.parametrize("bias", [-0.05, 0.0, 0.05])
def test_a_size_bias_is_recovered_within_its_own_uncertainty_from_six_samples(model, bias):
    found = [size_bias(model, measured_rows(results(model, bias, seed))) for seed in range(4)]
    scores = [(one.mean - bias) / one.sd for one in found]
    assert max(abs(score) for score in scores) < 2.0
    assert np.mean([one.sd for one in found]) < 0.04


def test_ignoring_a_size_bias_is_visibly_worse(model):
    measured = results(model, 0.05, 1)
    corrected = join_results(model, measured).model
    ignored = model.conditioned(measured_rows(measured))
    sizes = pd.DataFrame({"material": "CdSe", "diameter_nm": np.linspace(2.5, 6.0, 15)})
    truth = model.predict(pair_frame(sizes))["optical_gap_eV"]
    errors = [
        (other.predict(pair_frame(sizes))["optical_gap_eV"] - truth).abs().mean()
        for other in (corrected, ignored)
    ]
    assert errors[0] < errors[1]


def test_results_narrow_the_intervals_of_their_material(model):
    pairs = pair_frame(pd.DataFrame({"material": ["ZnTe"], "diameter_nm": [4.5]}))
    measured = results(model, 0.0, 0, ["ZnTe", "ZnTe", "ZnTe"])
    joined = join_results(model, measured).model
    widths = []
    for one in (model, joined):
        low, high = one.interval(one.predict(pairs), 0.9)
        widths.append(float(high[0] - low[0]))
    assert model.predict(pairs)["record_state"].iloc[0] == "new"
    assert joined.predict(pairs)["record_state"].iloc[0] == "on record"
    assert widths[1] < 0.5 * widths[0]


def test_other_materials_keep_their_predictions_where_nothing_is_shared(model):
    pairs = pair_frame(pd.DataFrame({"material": ["PbSe"], "diameter_nm": [5.0]}))
    joined = model.conditioned(measured_rows(results(model, 0.0, 0, ["ZnTe"])))
    before = model.predict(pairs)["optical_gap_eV"].iloc[0]
    assert joined.predict(pairs)["optical_gap_eV"].iloc[0] == pytest.approx(before, abs=0.01)


def test_a_result_that_the_model_held_for_improbable_is_listed(model):
    measured = results(model, 0.0, 0, ["CdSe", "CdSe", "InP"])
    measured.loc[0, "energy_eV"] += 0.5
    update = join_results(model, measured)
    assert update.results["is_improbable"].tolist() == [True, False, False]
    assert any("CdSe were held for improbable" in text for text in update.findings)


def test_a_biased_laboratory_is_told_apart_from_a_model_that_is_off(model):
    biased = join_results(model, results(model, 0.09, 0, MATERIALS * 2))
    assert biased.bias.is_telling
    assert any("too large" in text for text in biased.findings)
    honest = join_results(model, results(model, 0.0, 0, MATERIALS * 2))
    assert not honest.bias.is_telling


def test_a_drift_with_the_date_is_named(model):
    dates = [f"2026-03-{day:02d}" for day in range(1, 13)]
    drift = np.linspace(-0.25, 0.25, 12)
    drifting = results(model, 0.0, 0, ["CdSe"] * 12, drift, date=dates)
    assert any("a drift" in text for text in join_results(model, drifting).findings)
    steady = results(model, 0.0, 0, ["CdSe"] * 12, 0.0, date=dates)
    assert not any("a drift" in text for text in join_results(model, steady).findings)
