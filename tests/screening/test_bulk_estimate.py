"""Bulk constants of any compound: order of precedence, left-out systems, spread in size."""

import numpy as np
import pandas as pd
import pytest

from features.alloys import interpolate_alloy
from features.confinement import brus_gap_eV
from features.errors import FormulaError
from features.formula import parse_formula
from features.semiconductors import bulk_constants
from screening.bulk_estimate import (
    QUANTITIES,
    BulkConstantsModel,
    compound_family,
    estimate_bulk,
    training_rows,
)
from screening.bulk_estimate_audit import evaluate_bulk_constants
from screening.bulk_spread import particle_gap_spread_eV, sampled_particle_gap_eV

asked: list[list[str]] = []


def stand_in_gaps(materials):
    """Stand in for the gap model: 1.2 eV for everything, and remember what was asked."""
    asked.append(list(materials))
    return pd.DataFrame({"bulk_gap_eV": 1.2, "bulk_gap_sd_eV": 0.3}, index=range(len(materials)))


@pytest.fixture(scope="module")
def model():
    return BulkConstantsModel().fit()


@pytest.fixture(scope="module")
def without_cadmium_selenide():
    return BulkConstantsModel().fit(leave_out={"Cd-Se"})


def test_rows_come_back_in_the_order_given_and_only_unknown_compounds_are_estimated():
    asked.clear()
    materials = ["AgBiSe2", "CdSe", "CdSe0.5S0.5", "ZnGeP2", "SeCd"]
    frame = estimate_bulk(materials, stand_in_gaps)
    assert frame["material"].tolist() == materials
    assert frame["basis"].tolist() == ["model", "record", "alloy", "model", "record"]
    assert asked == [["AgBiSe2", "ZnGeP2"]]


def test_compounds_on_record_keep_their_constants():
    frame = estimate_bulk(["GaAs", "PbS"], stand_in_gaps)
    record = bulk_constants(["GaAs", "PbS"])
    for name in ("gap_eV", "gap_sd_eV", *QUANTITIES, "lattice_a_nm"):
        assert frame[name].tolist() == record[name].tolist()


def test_solid_solutions_keep_the_interpolated_constants():
    frame = estimate_bulk(["In0.8Ga0.2P"], stand_in_gaps)
    alloy = interpolate_alloy("In0.8Ga0.2P")
    assert frame["gap_eV"].iloc[0] == alloy.gap_eV.value
    assert frame["electron_mass_m0"].iloc[0] == alloy.electron_mass_m0.value


def test_estimates_are_less_certain_than_records():
    frame = estimate_bulk(["CdSe", "ZnGeP2"], stand_in_gaps)
    for quantity in QUANTITIES:
        record, estimate = frame[f"{quantity}_log_sd"]
        assert estimate > record


def test_no_materials_give_an_empty_frame_and_faulty_ones_a_message():
    assert len(estimate_bulk([], stand_in_gaps)) == 0
    with pytest.raises(FormulaError, match="unknown element"):
        estimate_bulk(["XxSe"], stand_in_gaps)


def test_a_left_out_system_takes_no_part(without_cadmium_selenide):
    for held in without_cadmium_selenide.left_out_.values():
        systems = {parse_formula(material).chemical_system for material in held["material"]}
        assert "Cd-Se" not in systems
        assert "Cd-Te" in systems


def test_constants_of_left_out_cadmium_selenide_lie_in_the_90_percent_interval(
    without_cadmium_selenide,
):
    estimate = without_cadmium_selenide.predict(["CdSe"], [1.74]).iloc[0]
    # Handbook: electron mass 0.13, heavy-hole mass 0.45, optical dielectric constant 6.2.
    for quantity, value in zip(QUANTITIES, (0.13, 0.45, 6.2), strict=True):
        error = abs(np.log(estimate[quantity] / value))
        assert error < 1.645 * estimate[f"{quantity}_log_sd"]


def test_left_out_systems_are_met_better_than_by_the_median_compound(model):
    for quantity, held in model.left_out_.items():
        rows = training_rows(quantity)
        rows = rows[rows["kind"] == 0.0]
        guess = np.abs(np.log(rows["value"] / rows["value"].median())).mean()
        assert held["log_error"].abs().mean() < 0.7 * guess


@pytest.mark.parametrize("material", ["ZnGeP2", "AgBiSe2", "Cs2AgBiBr6"])
def test_a_wider_gap_means_a_heavier_electron_and_a_smaller_dielectric_constant(model, material):
    frame = model.predict([material] * 3, [0.8, 1.6, 3.2])
    assert frame["electron_mass_m0"].is_monotonic_increasing
    assert frame["dielectric"].is_monotonic_decreasing


def test_training_is_deterministic(model):
    asked.clear()
    packaged = estimate_bulk(["ZnGeP2", "SnS2"], stand_in_gaps)  # trained apart, from scratch
    again = model.predict(["ZnGeP2", "SnS2"], [1.2, 1.2])
    pd.testing.assert_frame_equal(packaged[again.columns.tolist()], again)


def test_computed_dielectric_constants_join_with_their_own_kind():
    kinds = training_rows("dielectric")["kind"]
    assert set(kinds) == {0.0, 1.0}
    assert set(training_rows("electron_mass_m0")["kind"]) == {0.0}


@pytest.mark.parametrize(
    ("formula", "family"),
    [
        ("CdSe", "II-VI"),
        ("ZnTe0.5S0.5", "II-VI"),
        ("AgBiSe2", "V-VI"),
        ("Ga0.5In0.5As", "III-V"),
        ("CsSnCl3", "halide perovskite"),
        ("SnS2", "unlisted"),
        ("LaF3", "unlisted"),
    ],
)
def test_family_follows_from_the_columns_and_charges(formula, family):
    assert compound_family(parse_formula(formula)) == family


def test_audit_leaves_whole_systems_out_and_counts_every_record_once():
    table = evaluate_bulk_constants(n_splits=2).set_index("quantity")
    for quantity in QUANTITIES:
        rows = training_rows(quantity)
        assert table.loc[quantity, "n_materials"] == (rows["kind"] == 0.0).sum()
    assert (table["mean_log_error"] < table["mean_log_error_median"]).all()
    assert table["coverage_90"].between(0.7, 1.0).all()


def spread_frame(log_sd):
    frame = pd.DataFrame(
        {"diameter_nm": [2.5, 4.0, 8.0], "gap_eV": [1.7, 1.3, 0.9], "gap_sd_eV": [0.1, 0.0, 0.3]}
    )
    for quantity, value in zip(QUANTITIES, (0.13, 0.45, 7.0), strict=True):
        frame[quantity] = value
        frame[f"{quantity}_log_sd"] = log_sd
    return frame


@pytest.mark.parametrize("log_sd", [0.05, 0.2, 0.35])
def test_closed_form_of_the_spread_agrees_with_sampling(log_sd):
    frame = spread_frame(log_sd)
    sampled = sampled_particle_gap_eV(frame, n_samples=3000).std(axis=0)
    # 3000 draws know a standard deviation to 1.3 %; the rest is curvature, growing with the spread.
    assert particle_gap_spread_eV(frame) == pytest.approx(sampled, rel=0.04 + 0.25 * log_sd)


def test_without_uncertain_constants_only_the_bulk_gap_spreads():
    frame = spread_frame(0.0)
    assert particle_gap_spread_eV(frame) == pytest.approx(frame["gap_sd_eV"])


def test_smaller_particles_spread_more_and_any_gap_function_serves():
    frame = spread_frame(0.2).assign(gap_sd_eV=0.0, gap_eV=1.5)
    for spread in (particle_gap_spread_eV(frame), particle_gap_spread_eV(frame, brus_gap_eV)):
        assert spread[0] > spread[1] > spread[2] > 0.0
