import pytest

from features.errors import TableError
from features.size_gap import size_gap_rows
from features.tables import read_table
from screening.own_table import read_own_records

GOOD = "material,diameter_nm,energy_eV,energy_kind\nCdSe,3.0,2.25,first absorption\n"


def write(path, text):
    path.write_text(text, encoding="utf-8")
    return path


def test_a_table_with_the_four_columns_becomes_records(tmp_path):
    records = read_own_records(write(tmp_path / "mine.csv", GOOD + "SeCd,4.0,2.05,emission\n"))
    assert records.columns.tolist() == read_table("size_gap_records").columns.tolist()
    assert records["material"].tolist() == ["CdSe", "CdSe"]
    rows = size_gap_rows(records)
    assert (rows["noise_eV"] > 0).all()
    # an emission is below the gap by its Stokes shift
    assert rows["optical_gap_eV"].iloc[1] > 2.05
    assert rows["optical_gap_eV"].iloc[0] == 2.25


def test_optional_columns_are_taken_as_given(tmp_path):
    text = (
        "record,material,diameter_nm,energy_eV,energy_kind,energy_sd_eV,diameter_uncertainty_nm,"
        "shape,source\nmine1,PbS,5.0,0.9,first absorption,0.01,0.2,cube,run 7\n"
    )
    row = read_own_records(write(tmp_path / "mine.csv", text)).iloc[0]
    assert (row["record"], row["shape"], row["source"]) == ("mine1", "cube", "run 7")
    assert (row["energy_sd_eV"], row["diameter_uncertainty_nm"]) == (0.01, 0.2)


def test_all_faults_of_all_rows_are_reported_at_once(tmp_path):
    text = GOOD + (
        "Unobtainium,3.0,2.0,emission\nCdSe,300,2.0,emission\n"
        "CdSe,3.0,two,emission\nCdSe,3.0,2.0,glow\n"
    )
    with pytest.raises(TableError) as caught:
        read_own_records(write(tmp_path / "mine.csv", text))
    message = str(caught.value)
    assert "4 faulty rows" in message
    for part in ("row 3: material", "row 4: diameter_nm", "row 5: energy_eV", "row 6: energy_kind"):
        assert part in message
    places = [message.index(f"row {n}") for n in (3, 4, 5, 6)]
    assert places == sorted(places)


@pytest.mark.parametrize(
    ("header", "says"),
    [
        ("material,diameter_nm,energy_eV", "missing column 'energy_kind'"),
        ("material,diameter_nm,energy_eV,energy_kind,colour", "unknown column 'colour'"),
    ],
)
def test_the_header_is_checked_against_the_schema(tmp_path, header, says):
    with pytest.raises(TableError, match=says):
        read_own_records(write(tmp_path / "mine.csv", f"{header}\nCdSe,3,2,emission\n"))


@pytest.mark.parametrize("diameter", ["1.4", "20.1", "nan", "inf", "-3"])
def test_sizes_that_the_model_does_not_learn_from_are_refused(tmp_path, diameter):
    with pytest.raises(TableError, match=r"diameter_nm expected 1\.5 to 20 nm"):
        read_own_records(write(tmp_path / "mine.csv", GOOD + f"CdSe,{diameter},2.0,emission\n"))
