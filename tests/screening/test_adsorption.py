"""Adsorption energies of surfaces and sites, against published orders, slopes and left-out rows."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.stats import spearmanr

from features.adsorption import free_energy_eV, reaction, relative_volcano_log10
from features.adsorption_scaling import coordination_slope
from features.errors import FormulaError, SpecificationError, TableError, UnknownMaterialError
from screening.adsorption import RECORD_STATES, adsorption_model
from screening.adsorption_alloys import AlloySurfaceModel
from screening.adsorption_design import alloy_rows
from screening.adsorption_pure import PureSurfaceModel, facet_openness, pure_rows
from screening.adsorption_sites import TERRACE_COORDINATION, SiteShifts

REFERENCE = Path(__file__).parent.parent / "reference"
OUTPUT = [
    "adsorption_energy_eV",
    "adsorption_energy_low_eV",
    "adsorption_energy_high_eV",
    "adsorption_energy_sd_eV",
    "record_state",
    "nearest_source",
]


@pytest.fixture(scope="module")
def model():
    return adsorption_model()


@pytest.fixture(scope="module")
def pure():
    return PureSurfaceModel().fit(pure_rows())


def _surfaces(model, material, adsorbate, **columns):
    frame = pd.DataFrame({"material": material, "adsorbate": adsorbate, **columns})
    return model.predict_surfaces(frame)


def test_answer_keeps_order_and_index_and_holds_its_energy(model):
    frame = pd.DataFrame(
        {"material": ["AgAu", "Pt", "Pt3Ni", "W"], "adsorbate": ["OH", "H", "O", "CO"]},
        index=[7, 3, 3, "x"],
    )
    found = model.predict_surfaces(frame)
    assert list(found.columns) == OUTPUT
    assert list(found.index) == [7, 3, 3, "x"]
    alone = pd.concat([model.predict_surfaces(frame.iloc[[i]]) for i in range(4)])
    pd.testing.assert_frame_equal(found, alone, rtol=1e-9)
    low, mean, high = (found[OUTPUT[i]] for i in (1, 0, 2))
    assert ((low < mean) & (mean < high)).all()
    assert set(found["record_state"]) <= set(RECORD_STATES)


def test_order_of_elements_and_size_of_the_formula_do_not_matter(model):
    found = _surfaces(model, ["Pt3Ni", "NiPt3", "Pt6Ni2"], "OH")["adsorption_energy_eV"]
    # 1e-9: matrix products round differently in rows of one batch
    assert found.to_numpy() == pytest.approx(found.iloc[0], abs=1e-9)


def test_missing_face_is_the_close_packed_one(model):
    named = _surfaces(model, ["Pt", "Ru", "W"], "O", facet=["111", "0001", "110"])
    empty = _surfaces(model, ["Pt", "Ru", "W"], "O", facet=[None, "", np.nan])
    pd.testing.assert_frame_equal(named, empty)
    pd.testing.assert_frame_equal(named, _surfaces(model, ["Pt", "Ru", "W"], "O"))


def test_steps_bind_nitrogen_more_strongly_than_terraces(model):
    # Dahl et al., Phys. Rev. Lett. 83, 1814 (1999) on Ru; Norskov et al., J. Catal. 209, 275
    # (2002) on other metals (from memory)
    metals = ["Ru", "Rh", "Pd", "Pt", "Cu", "Fe"]
    step = _surfaces(model, metals, "N", facet="211")["adsorption_energy_eV"]
    terrace = _surfaces(model, metals, "N")["adsorption_energy_eV"]
    assert (step < terrace).all()


def test_hydrogen_evolution_orders_the_metals_as_measured(model):
    # Norskov et al., J. Electrochem. Soc. 152, J23 (2005)
    table = pd.read_csv(REFERENCE / "adsorption_exchange_currents.csv")
    table = table[table["electrolyte"] == "acid"].set_index("metal")
    energy = _surfaces(model, list(table.index), "H")["adsorption_energy_eV"]
    free = pd.Series(free_energy_eV(energy, "H"), table.index)
    top = pd.Series(relative_volcano_log10(free, reaction("hydrogen evolution")), table.index)
    assert top[["Pt", "Pd"]].min() > top[["Au", "Ag", "W", "Mo", "Nb"]].max()
    assert (free[["Au", "Ag"]] > 0.2).all()
    assert (free[["W", "Mo"]] < -0.2).all()
    rank = spearmanr(top, table["log10_exchange_current_A_cm2"])
    assert rank.statistic > 0.0
    assert rank.pvalue < 0.01


def test_hydroxyl_on_platinum_follows_the_published_slope_to_the_sites(model):
    # Calle-Vallejo et al., Science 350, 185 (2015): 0.19 eV per unit; their 40 points scatter by
    # 0.087 eV, so each point lies within four of the site's own deviations of the line
    points = pd.read_csv(REFERENCE / "adsorption_generalised_coordination.csv")
    points = points[(points["metal"] == "Pt") & (points["adsorbate"] == "OH")]
    sites = points[["generalised_coordination"]]
    found = model.predict_sites("Pt", "OH", sites)
    slope = np.polyfit(sites["generalised_coordination"], found["adsorption_energy_eV"], 1)[0]
    assert slope == pytest.approx(0.19, abs=0.01)
    gap = points["energy_vs_radical_eV"] - found["adsorption_energy_eV"]
    assert ((gap - gap.mean()).abs() < 4.0 * found["site_sd_eV"].max()).all()


def test_platinum_holds_hydroxyl_more_firmly_than_gold_by_the_published_difference(model):
    # Calle-Vallejo et al., Science 350, 185 (2015), lines of both metals at the (111) terrace:
    # -3.8166 + 0.1915 x 7.5 and -2.8925 + 0.1275 x 7.5 eV; each line scatters by 0.06 to 0.09 eV
    published = (-2.8925 + 0.1275 * 7.5) - (-3.8166 + 0.1915 * 7.5)
    gold, platinum = _surfaces(model, ["Au", "Pt"], "OH")["adsorption_energy_eV"]
    assert gold - platinum == pytest.approx(published, abs=0.1)


def test_terrace_site_is_the_extended_surface(model):
    for metal, structure in (("Pt", "fcc"), ("Ru", "hcp"), ("W", "bcc")):
        sites = pd.DataFrame({"generalised_coordination": [TERRACE_COORDINATION[structure]]})
        found = model.predict_sites(metal, "O", sites)[OUTPUT]
        surface = _surfaces(model, [metal], "O")
        pd.testing.assert_frame_equal(found, surface, rtol=1e-9)


def test_interval_of_a_site_widens_away_from_the_terrace(model):
    sites = pd.DataFrame({"generalised_coordination": [7.5, 6.0, 4.0, 2.0]}, index=list("abcd"))
    found = model.predict_sites("Pt3Ni", "OH", sites)
    width = found["adsorption_energy_high_eV"] - found["adsorption_energy_low_eV"]
    assert width.is_monotonic_increasing
    assert list(found.index) == list("abcd")


def test_site_without_a_possible_coordination_is_refused(model):
    with pytest.raises(TableError, match="generalised coordination"):
        model.predict_sites("Pt", "OH", pd.DataFrame({"generalised_coordination": [0.0]}))
    with pytest.raises(TableError, match="no column 'generalised_coordination'"):
        model.predict_sites("Pt", "OH", pd.DataFrame({"coordination": [9]}))


@pytest.mark.parametrize(
    ("columns", "error", "message"),
    [
        ({"material": "Pt", "adsorbate": "Xx"}, SpecificationError, "row 1: expected one of C,"),
        ({"material": "NaCl", "adsorbate": "O"}, UnknownMaterialError, "found Cl, Na"),
        ({"material": "PtNiCo", "adsorbate": "O"}, FormulaError, "too many elements"),
        ({"material": "Pt", "adsorbate": "O", "facet": "999"}, TableError, "unknown facet"),
        ({"material": "Pt", "adsorbate": "O", "structure": "?"}, TableError, "unknown structure"),
        ({"material": "Pt", "adsorbate": "O", "structure": "bcc"}, TableError, "does not fit Pt"),
        ({"material": "Pt3Ni", "adsorbate": "O", "structure": "L10"}, TableError, "Pt with Ni"),
        (
            {"material": "Pt", "adsorbate": "O", "facet": "0001", "structure": "fcc"},
            TableError,
            "hcp",
        ),
        ({"material": "Pt"}, TableError, "no column 'adsorbate'"),
    ],
)
def test_wrong_input_says_what_and_where(model, columns, error, message):
    with pytest.raises(error, match=message):
        model.predict_surfaces(pd.DataFrame({k: [v] for k, v in columns.items()}))


@pytest.fixture(scope="module")
def left_out_error(model):
    left = model.families_["oxygen and nitrogen"].left_out_compositions()
    return (left["predicted_eV"] - left["energy_eV"]).abs().groupby(left["adsorbate"]).mean()


@pytest.mark.parametrize(
    ("adsorbate", "limit_eV"), [("OH", 0.15), ("O", 0.25), ("N", 0.28), ("NH", 0.18)]
)
def test_compositions_left_out_keep_the_promised_error(left_out_error, adsorbate, limit_eV):
    assert left_out_error[adsorbate] <= limit_eV


def test_left_out_pure_metals_do_not_depend_on_their_own_energies(pure):
    rows = pure.rows_
    spoilt = rows.assign(energy_eV=rows["energy_eV"].where(rows["metal"] != "Pt", 99.0))
    # parameters kept; the scale of an adsorbate must stay as well, so the model is copied
    again = PureSurfaceModel()
    again.__dict__.update(pure.__dict__)
    again.rows_ = spoilt
    again.gaussian_ = _refitted(pure, spoilt)
    groups = rows["metal"].to_numpy()
    platinum = groups == "Pt"
    before = pure.leave_out(groups)["predicted_eV"][platinum]
    after = again.leave_out(groups)["predicted_eV"][platinum]
    np.testing.assert_allclose(after, before, atol=1e-6)


def _refitted(pure, rows):
    from sklearn.base import clone

    gaussian = clone(pure.gaussian_).set_params(start=pure.gaussian_.theta_, max_iter=0)
    noise = rows["noise_sd_eV"] / pure._deviation(rows)
    return gaussian.fit(pure._matrix(rows), pure._scaled(rows), noise_sd=noise)


def test_fitted_offset_of_a_source_is_found_again(pure):
    # the source set against itself plus 0.3 eV on every row
    rows = pure_rows()
    moved = rows["source"] == "alloy_ensembles"
    rows.loc[moved, "energy_eV"] += 0.3
    shifted = PureSurfaceModel().fit(rows, pure.gaussian_.theta_, max_iter=0).source_offsets()
    own = pure.source_offsets()
    change = (shifted.set_index(["source", "adsorbate"]) - own.set_index(["source", "adsorbate"]))[
        "offset_eV"
    ]
    # 0.03 eV: the offset's prior holds back a tenth of the move
    assert change.loc["alloy_ensembles"].to_numpy() == pytest.approx(0.3, abs=0.03)
    assert change.drop("alloy_ensembles").abs().max() < 0.1


def test_openness_follows_structure_and_face():
    assert facet_openness("fcc", "110") > facet_openness("fcc", "100") > 0.0
    assert facet_openness("fcc", "111") == facet_openness("bcc", "110") == 0.0


@pytest.mark.parametrize(("metal", "adsorbate"), [("Pt", "OH"), ("Au", "OH")])
def test_published_slope_outweighs_the_mean_of_other_metals(pure, metal, adsorbate):
    shifts = SiteShifts().fit(pure.rows_)
    published = coordination_slope(metal, adsorbate)[0]
    mean = SiteShifts().fit(pure.rows_, published=False).slope(metal, adsorbate)[0]
    slope, sd = shifts.slope(metal, adsorbate)
    assert abs(slope - published) <= abs(mean - published) + 1e-12
    assert 0.0 < sd < 0.1


def test_fit_is_deterministic(pure):
    rows = alloy_rows()
    fits = [AlloySurfaceModel(("H",)).fit(rows, pure) for _ in range(2)]
    frame = fits[0].rows_.head(20)
    for one, two in zip(*(fit.predict(frame) for fit in fits), strict=True):
        np.testing.assert_array_equal(one, two)
    assert fits[0].calibration_.factors_ == fits[1].calibration_.factors_
