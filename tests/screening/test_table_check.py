import pytest

from features.errors import TableError
from screening.table_check import check_text

TABLES = [
    ("material,diameter_nm,property,value\nCdSe,5,emission_nm,630\n", "results of a laboratory"),
    ("material,diameter_nm,energy_eV,energy_kind\nCdSe,5,2,first absorption\n", "records of size"),
    ("material,diameter_nm\nCdSe,5\nInP,3\n", "questions on quantum dots"),
    ("diameter_nm,count\n4,1\n5,2\n", "size distribution"),
]


@pytest.mark.parametrize(("text", "kind"), TABLES)
def test_a_table_is_told_by_its_columns_and_left_as_it_is(tmp_path, text, kind):
    path = tmp_path / "own.csv"
    path.write_text(text)
    words = check_text(path)
    assert kind in words
    assert f"{len(text.splitlines()) - 1} rows, no faults" in words
    assert path.read_text() == text


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("colour,price\nred,3\n", "no command takes a table with these columns"),
        ("material,diameter_nm\nCdSe,-5\n", "row 2: diameter_nm expected"),
        ("material,diameter_nm,property,value\nCdSe,5,emission_eV,630\n", "is this in nm?"),
    ],
)
def test_a_faulty_table_is_refused_as_its_command_would(tmp_path, text, words):
    path = tmp_path / "own.csv"
    path.write_text(text)
    with pytest.raises(TableError) as caught:
        check_text(path)
    assert words in str(caught.value)
