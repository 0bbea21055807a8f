import numpy as np
import pandas as pd
import pytest

from features.size_gap import (
    LARGEST_DIAMETER_nm,
    SMALLEST_DIAMETER_nm,
    size_band,
    size_gap_rows,
    training_rows,
)
from features.tables import read_table

# Published sizing functions, coefficients as printed in the papers (read in public copies):
# Jasieniak et al., J. Phys. Chem. C 113, 19468 (2009); Moreels et al., ACS Nano 3, 3023 (2009)
# and Chem. Mater. 19, 6101 (2007); Yu et al., Chem. Mater. 15, 2854 (2003).
LAWS_OF_ENERGY = {
    "PbS_moreelsetal2009": lambda d: 0.41 + 1 / (0.0252 * d**2 + 0.283 * d),
    "PbSe_moreelsetal2007": lambda d: 0.278 + 1 / (0.016 * d**2 + 0.209 * d + 0.45),
}
LAWS_OF_WAVELENGTH = {
    "CdSe_jasieniak2009": lambda x: (
        59.60816 - 0.54736 * x + 1.8873e-3 * x**2 - 2.85743e-6 * x**3 + 1.62974e-9 * x**4
    ),
    "CdS_yu2003": lambda x: -6.6521e-8 * x**3 + 1.9557e-4 * x**2 - 9.2352e-2 * x + 13.29,
    "CdTe_yu2003": lambda x: 9.8127e-7 * x**3 - 1.7147e-3 * x**2 + 1.0064 * x - 194.84,
}


@pytest.fixture(scope="module")
def records():
    return read_table("size_gap_records")


@pytest.mark.parametrize("curve", sorted(LAWS_OF_ENERGY))
def test_sampled_rows_lie_on_the_published_law_of_energy(records, curve):
    sampled = records[records["curve"].eq(curve)]
    assert len(sampled) == 10
    # Rows are rounded to 0.1 pm and 0.1 meV.
    np.testing.assert_allclose(
        LAWS_OF_ENERGY[curve](sampled["diameter_nm"]), sampled["energy_eV"], atol=2e-4
    )


@pytest.mark.parametrize("curve", sorted(LAWS_OF_WAVELENGTH))
def test_sampled_rows_lie_on_the_published_law_of_wavelength(records, curve):
    sampled = records[records["curve"].eq(curve)]
    assert len(sampled) == 10
    diameters = LAWS_OF_WAVELENGTH[curve](1239.841984 / sampled["energy_eV"])
    # 0.1 meV of rounding moves the polynomial by up to 10 pm.
    np.testing.assert_allclose(diameters, sampled["diameter_nm"], atol=0.01)


def test_no_record_lies_below_its_bulk_gap(records):
    rows = size_gap_rows(records)
    assert (rows["optical_gap_eV"] > rows["gap_eV"] - 0.03).all()


def test_a_curve_has_one_vote_and_a_point_has_one():
    rows = training_rows()
    votes = rows.groupby(rows["curve"].fillna(""))["vote"].sum().drop("")
    np.testing.assert_allclose(votes, 1.0)
    assert rows.loc[rows["curve"].isna(), "vote"].eq(1.0).all()


def test_training_keeps_to_the_size_range_and_leaves_clusters_out():
    rows = training_rows()
    assert rows["diameter_nm"].between(SMALLEST_DIAMETER_nm, LARGEST_DIAMETER_nm).all()
    assert not rows["record_kind"].eq("magic-size cluster").any()


def test_an_emission_record_becomes_a_gap_by_the_stokes_shift():
    record = read_table("size_gap_records").query("energy_kind == 'emission'").iloc[[0]]
    row = size_gap_rows(record).iloc[0]
    assert row["optical_gap_eV"] > row["energy_eV"]
    assert row["noise_eV"] > row["energy_sd_eV"]


def test_size_bands_are_half_open():
    assert size_band([1.99, 2.0, 9.0]).tolist() == [0, 1, 5]


def test_the_callers_index_is_kept():
    records = read_table("size_gap_records").iloc[[5, 9]].set_axis(["a", "b"])
    assert size_gap_rows(records).index.tolist() == ["a", "b"]
    assert isinstance(size_gap_rows(records), pd.DataFrame)
