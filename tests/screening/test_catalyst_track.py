"""Ranking of metal particles through the mechanism that both tracks share; its kept model."""

import json

import pandas as pd
import pytest

from features.errors import NothingQualifiesError
from screening.adsorption import AdsorptionModel, adsorption_model
from screening.catalyst_track import COLUMNS, VOLCANO_COLUMNS
from screening.ranking import rank
from screening.specification import parse_specification
from screening.tracks import track_of
from screening.trained import cache_folder
from screening.trained_surfaces import surface_fingerprint, trained_surfaces

OXYGEN = {
    "target": {"adsorbate": "O", "window_eV": [1.1, 1.5]},
    "candidates": {"materials": ["Pt", "Pd", "Au", "AgAu"], "diameter_nm": [2, 4], "step_nm": 0.5},
}


@pytest.fixture(scope="module")
def metals():
    return adsorption_model()


@pytest.fixture(scope="module")
def result(metals):
    return rank(parse_specification(OXYGEN), metals)


def test_a_window_ranks_metals_by_chance_and_their_sizes_by_sites_per_gram(result):
    assert tuple(result.shortlist.columns) == COLUMNS
    assert result.shortlist["chance_in_window"].is_monotonic_decreasing
    best = result.scored.groupby("material")["sites_in_window_umol_per_g"].max()
    for row in result.shortlist.itertuples():
        assert row.sites_in_window_umol_per_g == best[row.material]
    assert result.shortlist["rank"].tolist() == list(range(1, len(result.shortlist) + 1))
    assert result.shortlist["material"].is_unique


def test_platinum_metals_and_copper_are_likeliest_to_hold_hydrogen_loosely(metals):
    # Norskov et al., J. Electrochem. Soc. 152, J23 (2005): free energies near zero; Ag, Au weak,
    # W, Mo, Nb strong
    free = {"quantity": "adsorption_free_energy", "adsorbate": "H", "window_eV": [-0.15, 0.15]}
    asked = {"target": free, "candidates": {"diameter_nm": [2, 4], "step_nm": 1.0}}
    listed = rank(parse_specification(asked), metals).shortlist["material"].tolist()
    assert {"Pt", "Pd"} < set(listed[:6])
    assert not {"Au", "Ag", "W", "Mo", "Nb"} & set(listed[:6])


def test_a_reaction_ranks_by_relative_volcano_activity_per_mass(metals):
    asked = OXYGEN | {"target": {"reaction": "Oxygen Reduction"}}
    listed = rank(parse_specification(asked), metals).shortlist
    assert set(VOLCANO_COLUMNS) < set(listed.columns)
    assert listed["relative_volcano_activity_per_mass"].is_monotonic_decreasing


def test_no_column_speaks_of_activity_without_relative_and_volcano():
    named = [c for c in (*COLUMNS, *VOLCANO_COLUMNS) if "activity" in c]
    assert named
    assert all(c.startswith("relative_volcano_activity") for c in named)


def test_free_energy_is_given_where_a_correction_is_on_record(metals, result):
    listed = result.shortlist
    # 0.05 eV for oxygen in the table of corrections
    gap = listed["adsorption_free_energy_eV"] - listed["adsorption_energy_eV"]
    assert gap.to_numpy() == pytest.approx(0.05)
    sulfur = OXYGEN | {"target": {"adsorbate": "S", "window_eV": [-3, 0]}}
    assert (
        rank(parse_specification(sulfur), metals)
        .shortlist["adsorption_free_energy_eV"]
        .isna()
        .all()
    )


def test_a_window_of_free_energy_is_that_of_the_energy_moved_by_the_correction(metals):
    free = {"quantity": "adsorption_free_energy", "adsorbate": "H", "window_eV": [-0.1, 0.1]}
    energy = {"adsorbate": "H", "window_eV": [-0.34, -0.14]}
    one, other = (
        rank(parse_specification(OXYGEN | {"target": target}), metals).shortlist
        for target in (free, energy)
    )
    assert one["material"].tolist() == other["material"].tolist()
    # the correction's own uncertainty, 0.05 eV, widens the first a little
    gap = one["chance_in_window"] - other["chance_in_window"]
    assert gap.abs().max() < 0.05


def test_two_shapes_of_a_metal_need_no_distance_in_size(metals):
    asked = OXYGEN["candidates"] | {"materials": ["Pt"], "shapes": ["octahedron", "cube"]}
    specification = parse_specification(
        OXYGEN | {"candidates": asked, "shortlist": {"per_material": 2, "spacing_nm": 5.0}}
    )
    assert set(rank(specification, metals).shortlist["shape"]) == {"octahedron", "cube"}


def test_order_of_materials_does_not_change_the_ranking(metals, result):
    turned = OXYGEN["candidates"] | {"materials": ["AgAu", "Au", "Pd", "Pt"]}
    again = rank(parse_specification(OXYGEN | {"candidates": turned}), metals)
    pd.testing.assert_frame_equal(again.shortlist, result.shortlist)


def test_surfaces_off_record_can_be_left_out(metals):
    wanted = OXYGEN["candidates"] | {"materials": ["Pt", "Pt3Ni"], "unmeasured": False}
    found = rank(parse_specification(OXYGEN | {"candidates": wanted}), metals)
    assert set(found.shortlist["material"]) == {"Pt"}
    assert "no adsorption energy on record" in found.rejected["reason"].iloc[0]


def test_a_window_that_no_site_reaches_ends_in_words(metals):
    asked = OXYGEN | {"target": {"adsorbate": "O", "window_eV": [8.0, 9.0]}}
    with pytest.raises(NothingQualifiesError, match="no candidate qualifies"):
        rank(parse_specification(asked), metals)


def test_every_row_carries_cautions_that_defer(result):
    assert result.shortlist["cautions"].str.contains("safety data sheet").all()


def test_the_result_draws_and_shows_itself(result):
    assert result.plot().get_xlabel() == "Diameter (nm)"
    assert "<table" in result._repr_html_()


def test_warnings_count_surfaces_off_record_and_name_what_is_not_used(metals):
    wanted = OXYGEN["candidates"] | {"materials": ["Pt", "Pt3Ni"]}
    asked = OXYGEN | {"candidates": wanted, "laboratory": {"size_spread": 0.1}}
    found = rank(parse_specification(asked), metals)
    notes = " ".join(track_of(found.specification).warnings(found))
    assert "1 of 2 rows are surfaces that no table holds" in notes
    assert "[laboratory] is not used" in notes


def test_the_kept_model_answers_as_the_one_that_learned(metals):
    path = cache_folder() / f"surfaces-{surface_fingerprint()[:24]}.json"
    again = AdsorptionModel.restored(json.loads(path.read_text(encoding="utf-8")))
    frame = pd.DataFrame(
        {
            "material": ["Pt", "AgAu", "Pt3Ni", "Ru", "PtSn"],
            "adsorbate": ["OH", "O", "N", "CO", "CH3"],
            "facet": ["", "", "", "211", ""],
        }
    )
    pd.testing.assert_frame_equal(
        again.predict_surfaces(frame), metals.predict_surfaces(frame), rtol=1e-9
    )
    one, other = (
        m.families_["methyl"].left_out_compositions()["predicted_eV"] for m in (again, metals)
    )
    pd.testing.assert_series_equal(one, other, rtol=1e-9)


@pytest.mark.parametrize("text", ["", "[]", "{}", '{"pure": 1}', '{"pure": ["x"]}'])
def test_a_kept_file_of_another_kind_is_passed_over(tmp_path, monkeypatch, text):
    monkeypatch.setenv("FEWNM_CACHE", str(tmp_path))
    path = tmp_path / f"surfaces-{surface_fingerprint()[:24]}.json"
    path.write_text(text, encoding="utf-8")
    fresh = AdsorptionModel.__new__(AdsorptionModel)
    monkeypatch.setattr(AdsorptionModel, "fit", lambda _: fresh)
    monkeypatch.setattr(AdsorptionModel, "learned", lambda _: {"kept": True})
    trained_surfaces.cache_clear()
    try:
        assert trained_surfaces() is fresh
        assert json.loads(path.read_text(encoding="utf-8")) == {"kept": True}
    finally:
        trained_surfaces.cache_clear()
