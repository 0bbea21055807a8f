import numpy as np
import pandas as pd
import pytest

from screening.candidates import pair_frame
from screening.computed_dots_audit import beside_measurements, cost_of_atoms, error_by_material
from screening.computed_rows import SMALLEST_COMPUTED_nm, computed_rows
from screening.dots import NEW, ON_RECORD, SizeGapModel

FEW = ["Ag2S", "Ge", "GaP", "HgTe", "InAs", "PbTe", "SnSe", "SnTe", "ZnS", "ZnSe", "CsPbI3"]


@pytest.fixture(scope="module")
def without(rows):
    return SizeGapModel(computed=False).fit(rows).calibrate([ON_RECORD])


def asked(*materials):
    pairs = pd.DataFrame({"material": materials, "diameter_nm": 3.0})
    return pair_frame(pairs)


def test_computed_rows_have_the_columns_that_training_reads(rows):
    computed = computed_rows()
    needed = {"material", "family", "shape", "source", "diameter_nm", "optical_gap_eV"}
    needed |= {"noise_eV", "vote", "gap_eV", "electron_mass_m0", "hole_mass_m0", "dielectric"}
    assert needed <= set(computed) & set(rows)
    assert computed[sorted(needed)].notna().all(axis=None)
    assert computed["diameter_nm"].min() >= SMALLEST_COMPUTED_nm


def test_materials_on_record_are_answered_by_measurements_alone(model, without):
    frame = asked("CdSe", "PbS", "InP")
    columns = ["optical_gap_eV", "model_sd_eV"]
    pd.testing.assert_frame_equal(model.predict(frame)[columns], without.predict(frame)[columns])


def test_a_material_never_measured_follows_its_computed_crystallites(rows):
    own = rows["material"].eq("ZnSe")
    frame = asked("ZnSe")
    computed = computed_rows().query("material == 'ZnSe'").sort_values("diameter_nm")
    target = np.interp(3.0, computed["diameter_nm"], computed["optical_gap_eV"])
    miss = {}
    for use in (True, False):
        model = SizeGapModel(computed=use).fit(rows[~own])
        X, mean, scale = model._design.columns(frame, training=False)
        learned = model.regressor(NEW).gaussian_.predict(X)
        miss[use] = abs(float((mean + learned * scale)[0]) - target)
    assert miss[True] < miss[False]


def test_leaving_measured_rows_out_keeps_the_computed_ones(rows):
    own = rows["material"].eq("CdSe")
    model = SizeGapModel().fit(rows[~own])
    n_rows = len(model.regressor(NEW).gaussian_.y_)
    assert n_rows == (~own).sum() + len(computed_rows())


def test_errors_beside_measurements_are_computed_less_measured(rows):
    table = beside_measurements(rows)
    expected = table["computed_gap_eV"] - table["optical_gap_eV"]
    np.testing.assert_allclose(table["error_eV"], expected)
    assert {"CdSe", "CdS", "ZnSe", "InP", "Si"} <= set(table["material"])
    cdse = table[table["material"].eq("CdSe") & table["size_range"].eq("3-4 nm")]
    assert len(cdse) > 5


def test_cost_rises_with_atoms_and_six_nanometres_take_less_than_a_minute():
    table = cost_of_atoms()
    assert table["atoms"].is_monotonic_increasing
    assert table["atoms"].iloc[-1] > 4500
    assert table["seconds"].iloc[-1] < 60.0


def test_left_out_errors_by_material_are_those_of_a_model_that_never_saw_it(rows):
    few = rows[rows["material"].isin(FEW)]
    table = error_by_material(few, computed=True)
    assert sorted(table.index) == sorted(FEW)
    own = few["material"].eq("ZnSe")
    model = SizeGapModel().fit(few[~own]).calibrate([NEW])
    error = (model.predict(few[own])["optical_gap_eV"] - few[own]["optical_gap_eV"]).abs()
    assert table.loc["ZnSe", "error_eV"] == pytest.approx(
        np.average(error, weights=few[own]["vote"])
    )
    assert table["inside_90"].between(0.0, 1.0).all()
