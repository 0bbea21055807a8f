import numpy as np
import pandas as pd
import pytest

from screening.candidates import pair_frame
from screening.scores import describe
from screening.uncertainty_split import uncertainty_parts

PARTS = ["model_part_sd_eV", "data_scatter_sd_eV", "size_control_sd_eV", "correction_sd_eV"]


@pytest.fixture(scope="module")
def described(model):
    pairs = pd.DataFrame({"material": ["CdSe", "InSb", "PbS"], "diameter_nm": [3.0, 5.0, 6.0]})
    return describe(model, pair_frame(pairs), 0.07)


def test_parts_add_in_quadrature_to_the_total(model, described):
    parts = uncertainty_parts(model, described)
    total = np.sqrt((parts[PARTS] ** 2).sum(axis=1))
    np.testing.assert_allclose(parts["total_sd_eV"], total)
    whole = np.sqrt(
        described["model_sd_eV"] ** 2
        + described["stokes_sd_eV"] ** 2
        + described["size_sd_eV"] ** 2
    )
    np.testing.assert_allclose(parts["total_sd_eV"], whole)


def test_model_and_scatter_make_up_what_the_model_states(model, described):
    parts = uncertainty_parts(model, described)
    stated = np.hypot(parts["model_part_sd_eV"], parts["data_scatter_sd_eV"])
    np.testing.assert_allclose(stated, described["model_sd_eV"])
    assert (parts["data_scatter_sd_eV"] > 0).all()


def test_the_correction_belongs_to_the_emission_only(model, described):
    gap = uncertainty_parts(model, described, quantity="optical_gap")
    assert (gap["correction_sd_eV"] == 0.0).all()
    emission = uncertainty_parts(model, described)
    np.testing.assert_allclose(emission["correction_sd_eV"], described["stokes_sd_eV"])


def test_one_more_sample_helps_a_new_material_and_never_hurts(model, described):
    parts = uncertainty_parts(model, described).set_index(described["material"])
    assert (parts["total_after_one_more_sample_sd_eV"] <= parts["total_sd_eV"]).all()
    assert parts.loc["InSb", "shrinks_with_one_more_sample"]
    assert not parts.loc["CdSe", "shrinks_with_one_more_sample"]


def test_a_perfectly_known_pair_gains_nothing_from_a_sample(model, described):
    known = described.assign(model_sd_eV=model.scatter_sd_eV(described))
    parts = uncertainty_parts(model, known)
    np.testing.assert_allclose(parts["model_part_sd_eV"], 0.0, atol=1e-7)
    np.testing.assert_allclose(
        parts["total_after_one_more_sample_sd_eV"], parts["total_sd_eV"], rtol=1e-9
    )


def test_wider_size_control_widens_its_own_part_alone(model, described):
    wide = uncertainty_parts(model, described.assign(size_sd_eV=2.0 * described["size_sd_eV"]))
    narrow = uncertainty_parts(model, described)
    others = [part for part in PARTS if part != "size_control_sd_eV"]
    pd.testing.assert_frame_equal(wide[others], narrow[others])
    np.testing.assert_allclose(wide["size_control_sd_eV"], 2.0 * narrow["size_control_sd_eV"])


def test_columns_join_to_the_described_frame(model, described):
    joined = described.join(uncertainty_parts(model, described))
    assert joined.index.equals(described.index)
    assert set(PARTS) < set(joined)
