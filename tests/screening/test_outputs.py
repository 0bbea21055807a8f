import json

import numpy as np
import pandas as pd
import pyarrow.parquet as pq
import pytest

from features.errors import OutputError, TableError
from screening.outputs import csv_text, json_text, prepare_folder, write_atomically, write_parquet
from screening.user_tables import numeric_column, read_user_table


@pytest.mark.parametrize("text", ["=cmd()", "+1", "-1", "@sum", "\tx"])
def test_a_cell_that_a_spreadsheet_would_run_is_made_inert(text):
    assert csv_text(pd.DataFrame({"name": [text]})).splitlines()[1].lstrip('"').startswith("'")


def test_negative_numbers_stay_numbers():
    assert csv_text(pd.DataFrame({"shift_eV": [-0.5]})) == "shift_eV\n-0.5\n"


def test_json_has_a_schema_version_and_no_nan():
    content = json.loads(json_text(pd.DataFrame({"gap_eV": [np.nan, 1.5]}), "answer"))
    assert content["schema_version"] == 1
    assert [row["gap_eV"] for row in content["rows"]] == [None, 1.5]


def test_parquet_fields_carry_their_unit(tmp_path):
    write_parquet(tmp_path / "x.parquet", pd.DataFrame({"gap_eV": [1.0], "n": [1]}))
    schema = pq.read_schema(tmp_path / "x.parquet")
    assert schema.field("gap_eV").metadata == {b"unit": b"eV"}
    assert schema.field("n").metadata is None


def test_a_failed_write_leaves_the_earlier_file_and_nothing_else(tmp_path):
    path = tmp_path / "kept.txt"
    write_atomically(path, "first")
    with pytest.raises(UnicodeEncodeError):
        write_atomically(path, "\ud800")
    assert path.read_text() == "first"
    assert [p.name for p in tmp_path.iterdir()] == ["kept.txt"]


def test_a_folder_with_foreign_files_is_never_taken(tmp_path):
    (tmp_path / "thesis.txt").write_text("years of work")
    with pytest.raises(OutputError, match="--overwrite"):
        prepare_folder(tmp_path, overwrite=False)
    with pytest.raises(OutputError, match="no run wrote"):
        prepare_folder(tmp_path, overwrite=True)


def test_a_file_in_place_of_the_folder_is_refused(tmp_path):
    path = tmp_path / "out"
    path.write_text("")
    with pytest.raises(OutputError, match="not a folder"):
        prepare_folder(path, overwrite=True)


@pytest.mark.parametrize(
    ("raw", "message"),
    [
        (b"", "empty table"),
        (b"material,diameter_nm\n", "no rows"),
        (b"material;diameter_nm\nCdSe;3\n", "wrong delimiter"),
        (b"material\nCdSe\n", "missing column 'diameter_nm'"),
        (b"material,diameter_nm,material\nCdSe,3,InP\n", "repeated column 'material'"),
        (b"material,diameter_nm,colour\nCdSe,3,red\n", "unknown column 'colour'"),
        (b"material,diameter_nm\nCdSe,3,9\n", "row 2: expected 2 cells, found 3"),
        (b"\x00\x01\x02", "binary"),
        (b"material,diameter_nm\nCdS\xff,3\n", "not UTF-8"),
        (b'material,diameter_nm\n"CdSe,3\n', "not a CSV table"),
    ],
)
def test_a_table_that_does_not_fit_is_refused_in_plain_words(tmp_path, raw, message):
    path = tmp_path / "mine.csv"
    path.write_bytes(raw)
    with pytest.raises(TableError, match=message):
        read_user_table(path, ("material", "diameter_nm"))


def test_byte_order_mark_and_windows_lines_are_read(tmp_path):
    path = tmp_path / "mine.csv"
    path.write_bytes(b"\xef\xbb\xbfmaterial,diameter_nm\r\nCdSe,3\r\n\r\n")
    frame = read_user_table(path, ("material", "diameter_nm"))
    assert frame.to_dict("records") == [{"material": "CdSe", "diameter_nm": "3"}]


def test_every_faulty_number_is_listed_with_its_row():
    frame = pd.DataFrame({"d": ["3", "three", "-1", "nan", "1e9", None]})
    _, faults = numeric_column(frame, "d", 0.5, 200.0, "nm")
    assert [fault.split(":")[0] for fault in faults] == [f"row {n}" for n in (3, 4, 5, 6, 7)]
