import frictionless
import pytest

from features.errors import TableError
from features.tables import packaged_path, read_package, read_table, table_names


def test_the_package_of_tables_is_valid_with_all_keys_and_constraints():
    report = frictionless.validate(str(packaged_path("datasets", "datapackage.json")))
    assert report.valid, report.flatten(["type", "title", "note"])


def test_every_value_is_traceable_to_a_source_row():
    known = set(read_table("sources")["source"])
    for name in table_names():
        table = read_table(name)
        if "source" in table and name != "sources":
            assert set(table["source"]) <= known, name
            assert table["from_memory"].notna().all(), name


def test_every_source_serves_a_table():
    used = set()
    for resource in read_package()["resources"]:
        for key in resource["schema"].get("foreignKeys", []):
            if key["reference"]["resource"] == "sources":
                used |= set(read_table(resource["name"])[key["fields"][0]].dropna())
    assert set(read_table("sources")["source"]) <= used


def test_the_emission_tables_hold_at_least_twenty_materials_in_five_families():
    records = read_table("size_gap_records")["material"].unique()
    bulk = read_table("bulk_semiconductors").set_index("material")
    assert len(records) >= 20
    assert bulk.loc[records, "family"].nunique() >= 5


def test_a_copy_is_handed_out():
    table = read_table("stokes_shifts")
    table["name"] = "spoilt"
    assert "spoilt" not in set(read_table("stokes_shifts")["name"])


def test_datasets_hold_no_code():
    assert not list(packaged_path("datasets").rglob("*.py"))
    assert all(r["path"].endswith(".csv") for r in read_package()["resources"])


def test_an_unknown_table_and_an_unknown_file_are_named():
    with pytest.raises(TableError, match="no table 'nothing'"):
        read_table("nothing")
    with pytest.raises(TableError, match="no packaged file"):
        packaged_path("configs", "nothing.toml")
