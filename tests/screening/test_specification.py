from contextlib import suppress

import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.errors import SpecificationError, TableError
from features.tables import packaged_path
from screening.specification import load_specification, parse_specification

GOOD = {"target": {"window_nm": [625.0, 635.0]}}


def test_nm_and_eV_describe_the_same_window():
    by_nm = parse_specification(GOOD).target.energies_eV
    by_eV = parse_specification({"target": {"window_eV": list(by_nm)}}).target.energies_eV
    assert by_eV == pytest.approx(by_nm)
    assert by_nm[0] < by_nm[1]


@pytest.mark.parametrize(
    "path", sorted(packaged_path("configs").glob("*.toml")), ids=lambda p: p.stem
)
def test_every_packaged_specification_is_valid(path):
    assert load_specification(path).title


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"target": {"window_mn": [625, 635]}}, "unknown key 'window_mn'.*did you mean window_"),
        ({"laboratory": {"spread": 0.1}}, "unknown key 'spread'.*did you mean size_spread"),
        ({"colour": "red"}, "unknown key 'colour'.*expected one of title, target"),
        ({"target": {"window_nm": [635, 625]}}, "upside down"),
        ({"target": {"window_nm": [625, 625]}}, "upside down"),
        ({"target": {"window_nm": [1.9, 2.0]}}, "are these eV"),
        ({"target": {"window_eV": [520, 530]}}, "are these nm"),
        ({"target": {"window_nm": [625, 635], "window_eV": [1.9, 2.0]}}, "exactly one"),
        ({"target": {}}, "exactly one"),
        ({"target": {"window_nm": [625]}}, "at least 2 items"),
        ({"target": {"window_nm": ["red", 635]}}, "valid number"),
        ({"target": {"window_nm": [float("nan"), 635]}}, "finite"),
        (
            {"target": {"window_nm": [625, 635], "quantity": "colour"}},
            "'emission' or 'optical_gap'",
        ),
        ({"candidates": {"diameter_nm": [-1, 5]}}, "where the model holds"),
        ({"candidates": {"diameter_nm": [2, 500]}}, "where the model holds"),
        ({"candidates": {"diameter_nm": [8, 2]}}, "where the model holds"),
        ({"candidates": {"step_nm": 0}}, "greater than or equal"),
        ({"candidates": {"exclude_elements": ["cadmium"]}}, "match pattern"),
        ({"laboratory": {"size_spread": 0}}, "greater than 0"),
        ({"shortlist": {"length": 0}}, "greater than or equal to 1"),
        ({"seed": -1}, "greater than or equal to 0"),
        ({"title": ""}, "at least 1 character"),
    ],
)
def test_a_fault_is_named_with_its_place(change, message):
    with pytest.raises(SpecificationError, match=message):
        parse_specification(GOOD | change, "mine.toml")


def test_all_faults_are_reported_at_once():
    with pytest.raises(SpecificationError) as caught:
        parse_specification(GOOD | {"colour": 1, "seed": -1}, "mine.toml")
    assert len(str(caught.value).splitlines()) == 2


@given(
    st.recursive(
        st.none() | st.booleans() | st.floats() | st.text(),
        lambda inner: st.lists(inner) | st.dictionaries(st.text(), inner),
        max_leaves=12,
    )
)
def test_any_content_is_accepted_or_refused_in_plain_words(content):
    # Any other exception fails the test; acceptance needs a valid window.
    with suppress(SpecificationError):
        assert parse_specification({"target": content}).target.energies_eV


@pytest.mark.parametrize(
    ("raw", "message"),
    [
        (b"target = [", "not a TOML file"),
        (b"\xff\xfe", "not UTF-8"),
        (b"#" * 1_000_001, "too large"),
    ],
)
def test_a_file_that_is_no_specification_is_refused(tmp_path, raw, message):
    path = tmp_path / "spec.toml"
    path.write_bytes(raw)
    with pytest.raises(SpecificationError, match=message):
        load_specification(path)


def test_a_missing_file_is_named(tmp_path):
    with pytest.raises(SpecificationError, match=r"gone\.toml"):
        load_specification(tmp_path / "gone.toml")


def test_a_measured_size_distribution_is_read_beside_the_specification(tmp_path):
    (tmp_path / "sizes.csv").write_text("diameter_nm,count\n3.8,10\n4.0,20\n4.2,10\n")
    file = tmp_path / "spec.toml"
    file.write_text('[target]\nwindow_nm = [625, 635]\n[laboratory]\nsizes = "sizes.csv"\n')
    shape = load_specification(file).laboratory.size_shape()
    assert shape.ratio.tolist() == pytest.approx([0.95, 1.0, 1.05])
    assert shape.weight.tolist() == pytest.approx([0.25, 0.5, 0.25])


@pytest.mark.parametrize(
    ("table", "error", "words"),
    [
        ("diameter_nm\n4.0\n4.0\n", SpecificationError, "too few sizes"),
        ("diameter_nm,count\n4.0,-1\n4.2,3\n", TableError, "row 2: count"),
        ("size\n4.0\n", TableError, "missing column 'diameter_nm'"),
        (None, TableError, "cannot read the table"),
    ],
)
def test_a_size_distribution_that_cannot_be_is_refused(tmp_path, table, error, words):
    if table is not None:
        (tmp_path / "sizes.csv").write_text(table)
    file = tmp_path / "spec.toml"
    file.write_text('[target]\nwindow_nm = [625, 635]\n[laboratory]\nsizes = "sizes.csv"\n')
    with pytest.raises(error, match=words):
        load_specification(file)


def test_a_spread_and_a_distribution_together_are_refused(tmp_path):
    (tmp_path / "sizes.csv").write_text("diameter_nm\n4.0\n4.2\n")
    file = tmp_path / "spec.toml"
    laboratory = 'sizes = "sizes.csv"\nsize_spread = 0.05\n'
    file.write_text(f"[target]\nwindow_nm = [625, 635]\n[laboratory]\n{laboratory}")
    with pytest.raises(SpecificationError, match="size_spread or sizes, found both"):
        load_specification(file)
