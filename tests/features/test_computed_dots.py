import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.bulk_bands import accepted_sets
from features.computed_dots import compute_dot, planned_dots, write_table
from features.computed_gaps import computed_gaps, penn_gap_eV, size_dielectric
from features.errors import PhysicsRangeError
from features.tables import read_table

KEYS = ["parameter_set", "cutting_diameter_nm", "centre"]
RECOMPUTED = [
    ("ZnSe sp3s*", 2.1, "cation"),
    ("CdSe sp3s*", 1.8, "anion"),
    ("InP sp3d5s*", 1.5, "cation"),
    ("Si sp3d5s*", 2.5, "anion"),
    ("AlAs sp3d5s*", 1.5, "anion"),
]


@pytest.fixture(scope="module")
def table():
    return read_table("computed_dots")


@pytest.mark.parametrize("key", RECOMPUTED)
def test_rows_of_the_table_can_be_computed_again(table, key):
    row = table.set_index(KEYS).loc[key]
    again = compute_dot(*key)
    assert again["atoms"] == row["atoms"]
    for column in ("confinement_eV", "electron_confinement_eV"):
        assert again[column] == pytest.approx(row[column], abs=2e-5)
    assert again["attraction_eV"] == pytest.approx(row["attraction_eV"], abs=2e-3)


def test_the_table_holds_what_is_planned_and_nothing_else(table):
    planned = list(planned_dots())
    assert len(set(planned)) == len(planned) == len(table)
    assert set(table[KEYS].itertuples(index=False, name=None)) == set(planned)


def test_all_rows_converged_and_come_from_accepted_sets(table):
    assert table["residual_eV"].max() < 1e-8
    assert set(table["parameter_set"]) <= set(accepted_sets())
    assert table["material"].nunique() >= 10


def test_computed_gaps_fall_with_size():
    for _, dots in computed_gaps().groupby("material"):
        ordered = dots.sort_values("diameter_nm")
        assert (np.diff(ordered["confinement_eV"]) < 0.0).all()


def test_electron_and_hole_share_the_confinement(table):
    share = table["electron_confinement_eV"] / table["confinement_eV"]
    assert share.between(0.1, 0.95).all()


# Small-angle-scattering and sizing-curve records of the table size_gap_records, 3 to 6 nm.
@pytest.mark.parametrize("material", ["CdSe", "ZnSe", "InP"])
def test_computed_gaps_lie_near_measured_ones_with_nothing_fitted(material):
    dots = computed_gaps().query("material == @material").sort_values("diameter_nm")
    records = read_table("size_gap_records").query("material == @material")
    records = records[
        records["energy_kind"].eq("first absorption") & records["diameter_nm"].between(3.0, 5.5)
    ]
    assert len(records) >= 4
    found = np.interp(records["diameter_nm"], dots["diameter_nm"], dots["optical_gap_eV"])
    assert abs(np.median(found - records["energy_eV"])) < 0.15


def test_an_interrupted_run_goes_on_where_it_stopped(tmp_path, monkeypatch):
    plan = [("ZnSe sp3s*", 1.2, "anion"), ("ZnSe sp3s*", 1.5, "anion")]
    monkeypatch.setattr("features.computed_dots.planned_dots", lambda: iter(plan))
    path = tmp_path / "dots.csv"
    write_table(path)
    whole = path.read_bytes()
    rows = pd.read_csv(path, dtype={"spin_orbit": str})
    rows.iloc[1:].to_csv(path, index=False)
    write_table(path)
    assert path.read_bytes() == whole
    monkeypatch.setattr("features.computed_dots.compute_dot", None)
    write_table(path)
    assert path.read_bytes() == whole


@given(st.floats(1.5, 40), st.floats(0, 5))
def test_screening_weakens_with_confinement_and_is_that_of_the_bulk_without(dielectric, shift):
    penn = float(penn_gap_eV(dielectric, 0.58))
    assert float(size_dielectric(dielectric, penn, 0.0)) == pytest.approx(dielectric)
    small = float(size_dielectric(dielectric, penn, shift))
    assert 1.0 < small <= dielectric * (1 + 1e-12)


def test_silicon_has_its_published_penn_gap():
    # 4.8 eV: D. R. Penn, Phys. Rev. 128, 2093 (1962), with a slightly other formula (from memory).
    assert float(penn_gap_eV(11.7, 0.5431)) == pytest.approx(4.8, rel=0.1)


def test_a_dielectric_constant_of_one_is_refused():
    with pytest.raises(PhysicsRangeError, match="dielectric_above_1"):
        penn_gap_eV(1.0, 0.5)
