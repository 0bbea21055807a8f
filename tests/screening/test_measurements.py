from contextlib import suppress

import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.errors import TableError
from screening.measurements import measured_rows, read_measurements

HEAD = "material,diameter_nm,property,value"


def write(tmp_path, *lines, head=HEAD):
    path = tmp_path / "results.csv"
    path.write_text("\n".join([head, *lines]) + "\n", encoding="utf-8")
    return path


def test_wavelengths_and_energies_of_one_sample_are_the_same_result(tmp_path):
    # 630 nm is 1239.842 / 630 eV by the exact constants of the SI
    path = write(tmp_path, "CdSe,5.0,emission_nm,630", "CdSe,5.1,emission_eV,1.96800315")
    frame = read_measurements(path)
    assert frame["energy_eV"].iloc[0] == pytest.approx(frame["energy_eV"].iloc[1], rel=1e-7)


def test_emission_becomes_a_gap_by_the_stokes_shift_and_absorption_does_not(tmp_path):
    path = write(tmp_path, "CdSe,5.0,emission_eV,1.95", "CdSe,5.0,optical_gap_eV,1.95")
    rows = measured_rows(read_measurements(path))
    assert rows["optical_gap_eV"].iloc[0] > 1.95
    assert rows["optical_gap_eV"].iloc[1] == 1.95


def test_a_missing_uncertainty_is_never_taken_as_none(tmp_path):
    rows = measured_rows(read_measurements(write(tmp_path, "CdSe,5.0,optical_gap_eV,1.95")))
    assert rows["noise_eV"].iloc[0] > 0.02


def test_the_file_is_never_altered(tmp_path):
    path = write(tmp_path, "CdSe,5.0,emission_nm,630")
    before = path.read_bytes()
    read_measurements(path)
    assert path.read_bytes() == before


FAULTS = [
    ("CdSe,51.5,emission_nm,630", "is this in angstroms? then write 5.15"),
    ("CdSe,5.0,emission_eV,630", "is this in nm?"),
    ("CdSe,5.0,emission_nm,1.97", "is this in eV?"),
    ("CdSe,5.0,colour,630", "property expected one of"),
    ("CdSe,-5.0,emission_nm,630", "diameter_nm expected"),
    ("CdSe,nan,emission_nm,630", "diameter_nm expected"),
    ("Qq,5.0,emission_nm,630", "unknown element"),
    (",5.0,emission_nm,630", "empty formula"),
]


@pytest.mark.parametrize(("line", "words"), FAULTS)
def test_a_slip_is_caught_with_a_hint(tmp_path, line, words):
    with pytest.raises(TableError) as caught:
        read_measurements(write(tmp_path, "InP,3.0,emission_nm,600", line))
    assert words in str(caught.value)
    assert "row 3" in str(caught.value)


def test_all_faulty_rows_are_reported_at_once(tmp_path):
    with pytest.raises(TableError) as caught:
        read_measurements(write(tmp_path, *(line for line, _ in FAULTS)))
    for row in range(2, 2 + len(FAULTS)):
        assert f"row {row}" in str(caught.value)


def test_a_repeated_row_is_named_with_the_first(tmp_path):
    line = "CdSe,5.0,emission_nm,630"
    with pytest.raises(TableError, match="row 4: repeats row 2"):
        read_measurements(write(tmp_path, line, "CdSe,4.0,emission_nm,590", line))


def test_rows_of_one_sample_that_contradict_each_other_are_refused(tmp_path):
    head = f"{HEAD},value_sd,sample"
    lines = ["CdSe,5.0,emission_nm,630,2,a", "CdSe,5.0,emission_nm,560,2,a"]
    with pytest.raises(TableError, match="contradicts"):
        read_measurements(write(tmp_path, *lines, head=head))
    two = ["CdSe,5.0,emission_nm,630,2,a", "InP,5.0,emission_nm,631,2,a"]
    with pytest.raises(TableError, match="two materials or diameters"):
        read_measurements(write(tmp_path, *two, head=head))


def test_a_date_must_be_a_date(tmp_path):
    with pytest.raises(TableError, match="date expected as 2026-01-31"):
        read_measurements(write(tmp_path, "CdSe,5,emission_nm,630,3/4/26", head=f"{HEAD},date"))


@given(st.text(max_size=40))
def test_any_text_is_a_table_or_one_clear_error(tmp_path_factory, text):
    path = tmp_path_factory.mktemp("any") / "results.csv"
    path.write_text(text, encoding="utf-8", errors="replace")
    with suppress(TableError):
        assert len(read_measurements(path)) > 0
