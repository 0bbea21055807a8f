import json
import os
import subprocess
import sys
from pathlib import Path

import pandas as pd
import pytest

HYDROGEN = "[target]\nreaction = 'hydrogen evolution'\n"
SPEC = """
[target]
window_nm = [625, 635]
[candidates]
materials = ["CdSe", "InP", "CsPbI3"]
step_nm = 0.25
"""


def fewnm(*arguments, cwd=None):
    return subprocess.run(
        [sys.executable, "-c", "from screening.cli import main; main()", *map(str, arguments)],
        capture_output=True,
        text=True,
        cwd=cwd,
        check=False,
        timeout=300,
        env=os.environ | {"PYTHONPATH": str(Path(__file__).parents[2])},
    )


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    folder = tmp_path_factory.mktemp("run")
    (folder / "spec.toml").write_text(SPEC)
    return folder, fewnm("rank", "spec.toml", "--out", "results", cwd=folder)


def test_rank_writes_every_promised_file_and_keeps_standard_output_clean(run):
    folder, done = run
    assert done.returncode == 0, done.stderr
    assert done.stdout == ""
    names = {p.name for p in (folder / "results").iterdir()}
    assert names == {
        "shortlist.csv",
        "shortlist.parquet",
        "shortlist.json",
        "rejected.csv",
        "report.html",
        "manifest.json",
    }


def test_the_three_tables_agree(run):
    results = run[0] / "results"
    by_csv = pd.read_csv(results / "shortlist.csv")
    by_json = pd.DataFrame(json.loads((results / "shortlist.json").read_text())["rows"])
    by_parquet = pd.read_parquet(results / "shortlist.parquet")
    pd.testing.assert_frame_equal(by_csv, by_parquet, rtol=1e-5, check_dtype=False)
    pd.testing.assert_frame_equal(by_csv, by_json, rtol=1e-5, check_dtype=False)


def test_the_same_inputs_give_the_same_bytes(run):
    folder = run[0]
    again = fewnm("rank", "spec.toml", "--out", "again", cwd=folder)
    assert again.returncode == 0, again.stderr
    for path in (folder / "results").iterdir():
        if path.suffix != ".parquet":
            assert path.read_bytes() == (folder / "again" / path.name).read_bytes(), path.name


def test_the_manifest_names_no_folder_or_user(run):
    text = (run[0] / "results" / "manifest.json").read_text()
    assert str(run[0]) not in text
    assert json.loads(text)["result_hash"]


def test_an_earlier_run_is_not_overwritten_without_being_told(run):
    folder = run[0]
    before = (folder / "results" / "shortlist.csv").read_bytes()
    refused = fewnm("rank", "spec.toml", "--out", "results", cwd=folder)
    assert refused.returncode == 2
    assert "--overwrite" in refused.stderr
    assert (folder / "results" / "shortlist.csv").read_bytes() == before


@pytest.mark.parametrize(
    ("text", "code", "message"),
    [
        ("[target]\nwindow_mn = [625, 635]\n", 4, "did you mean window_"),
        ("[target]\nwindow_nm = [635, 625]\n", 4, "upside down"),
        ("[target]\nwindow_nm = [1.9, 2.0]\n", 4, "are these eV"),
        (
            "[target]\nwindow_nm = [625, 635]\n[candidates]\nmaterials = ['Xy2']\n",
            4,
            "unknown element",
        ),
        (
            "[target]\nwindow_nm = [625, 635]\n[candidates]\nmaterials = ['CuAu']\n",
            4,
            "all constituents are metals",
        ),
        (
            "[target]\nwindow_nm = [625, 635]\n[candidates]\ndiameter_nm = [-2, 5]\n",
            4,
            "where the model holds",
        ),
        (
            "[target]\nwindow_nm = [180, 181]\n[candidates]\nmaterials = ['PbS']\n",
            5,
            "no candidate qualifies",
        ),
        ("not toml", 4, "not a TOML file"),
        ("[target]\nreaction = 'alchemy'\n", 4, "unknown reaction"),
        ("[target]\nadsorbate = 'Xx'\nwindow_eV = [0, 1]\n", 4, "unknown adsorbate"),
        (
            "[target]\nreaction = 'hydrogen evolution'\n[candidates]\nmaterials = ['Xe']\n",
            4,
            "no surface data for this element",
        ),
        (
            HYDROGEN + "[candidates]\nmaterials = ['Pt']\nshapes = ['rhombic_dodecahedron']\n",
            4,
            "shape of bcc metals",
        ),
        (
            HYDROGEN + "[candidates]\nmaterials = ['Pt']\ndiameter_nm = [0.5, 3]\n",
            4,
            "13 atoms",
        ),
        (
            HYDROGEN + "[candidates]\nmaterials = ['Pt']\nexclude_elements = ['Pt']\n",
            5,
            "no metal is left",
        ),
    ],
)
def test_a_bad_specification_gives_one_message_its_code_and_writes_nothing(
    tmp_path, text, code, message
):
    (tmp_path / "spec.toml").write_text(text)
    done = fewnm("rank", "spec.toml", "--out", "results", cwd=tmp_path)
    assert done.returncode == code, done.stderr
    assert message in done.stderr
    assert "Traceback" not in done.stderr
    assert not (tmp_path / "results").exists()


@pytest.mark.parametrize(
    ("arguments", "code", "message"),
    [
        (("predict", "CdSe", "--", "-3"), 2, "expected > 0"),
        (("predict", "CdSe", "three"), 2, "Invalid value for 'diameter_nm'"),
        (("predict",), 2, "give a material"),
        (("predict", "Qq", "3"), 3, "unknown element"),
        (("predict", "--table", "missing.csv"), 3, "cannot read the table"),
        (("rank", "no-such-name", "--out", "x"), 4, "no specification 'no-such-name'"),
        (("data", "no-such-table"), 3, "no table"),
        (("unheard-of",), 2, "No such command"),
    ],
)
def test_misuse_gives_one_message_and_the_documented_code(tmp_path, arguments, code, message):
    done = fewnm(*arguments, cwd=tmp_path)
    assert done.returncode == code, done.stderr
    assert message in done.stderr
    assert "Traceback" not in done.stderr
    assert list(tmp_path.iterdir()) == []


def test_one_pair_is_answered_as_json_on_standard_output():
    done = fewnm("predict", "CdSe", "3.0", "--format", "json")
    row = json.loads(done.stdout)["rows"][0]
    assert row["optical_gap_low_eV"] < row["optical_gap_eV"] < row["optical_gap_high_eV"]


def test_a_table_of_pairs_is_answered_in_the_order_given(tmp_path):
    (tmp_path / "pairs.csv").write_text(
        "material,diameter_nm,shape\nPbS,4,\nInP,3,tetrahedron\nPbS,3,sphere\n"
    )
    done = fewnm("predict", "--table", "pairs.csv", "--format", "csv", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    (tmp_path / "out.csv").write_text(done.stdout)
    answer = pd.read_csv(tmp_path / "out.csv")
    assert answer[["material", "diameter_nm"]].to_numpy().tolist() == [
        ["PbS", 4],
        ["InP", 3],
        ["PbS", 3],
    ]


def test_all_faulty_rows_of_a_table_are_reported_at_once(tmp_path):
    (tmp_path / "pairs.csv").write_text("material,diameter_nm\nXx,3\nCdSe,3\nCdSe,-2\nCdSe,thick\n")
    done = fewnm("predict", "--table", "pairs.csv", cwd=tmp_path)
    assert done.returncode == 3
    for row in ("row 2", "row 4", "row 5"):
        assert row in done.stderr
    assert done.stdout == ""


def test_a_structure_that_a_metal_does_not_have_is_refused(tmp_path):
    (tmp_path / "surfaces.csv").write_text(
        "material,structure,facet,adsorbate\nPt,bcc,110,O\nPt,fcc,111,O\nPt,fcc,0001,O\n"
    )
    done = fewnm("predict", "--table", "surfaces.csv", cwd=tmp_path)
    assert done.returncode == 3
    assert "row 2: structure does not fit Pt" in done.stderr
    assert "row 4: face 0001 belongs to hcp" in done.stderr
    assert done.stdout == ""


def test_particles_without_a_shape_take_the_usual_one(tmp_path):
    (tmp_path / "sites.csv").write_text("material,adsorbate,diameter_nm\nRu,N,3\n")
    done = fewnm("predict", "--table", "sites.csv", "--format", "csv", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    assert "truncated_hexagonal_bipyramid" in done.stdout


def test_catalysts_are_ranked_by_the_same_command_with_the_same_files(tmp_path):
    (tmp_path / "spec.toml").write_text(
        "[target]\nreaction = 'oxygen reduction'\n"
        "[candidates]\nmaterials = ['Pt', 'Pd']\nstep_nm = 0.5\n"
    )
    done = fewnm("rank", "spec.toml", "--out", "results", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    names = {p.name for p in (tmp_path / "results").iterdir()}
    assert {"shortlist.csv", "shortlist.parquet", "shortlist.json", "rejected.csv"} < names
    assert {"report.html", "manifest.json"} < names
    listed = pd.read_csv(tmp_path / "results" / "shortlist.csv")
    assert "relative_volcano_activity_per_mass" in listed


def test_start_writes_a_specification_that_runs_and_keeps_an_existing_file(tmp_path):
    assert fewnm("start", "mine.toml", cwd=tmp_path).returncode == 0
    text = (tmp_path / "mine.toml").read_text()
    assert fewnm("start", "mine.toml", cwd=tmp_path).returncode == 2
    assert (tmp_path / "mine.toml").read_text() == text


@pytest.mark.parametrize("arguments", [(), ("-h",), ("rank", "--help"), ("predict", "--help")])
def test_help_names_the_exit_codes(arguments):
    done = fewnm(*arguments)
    assert "Exit codes" in done.stdout + done.stderr


def test_help_loads_no_heavy_library():
    code = (
        "import sys; import screening.cli; "
        "names = 'pandas sklearn numpy matplotlib pymatgen pydantic'; "
        "heavy = set(names.split()) & set(sys.modules); "
        "sys.exit(', '.join(sorted(heavy)) if heavy else 0)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        text=True,
        check=False,
        cwd=Path(__file__).parents[2],
    )
    assert done.returncode == 0, done.stderr


def test_data_lists_every_table():
    from features.tables import table_names

    listing = fewnm("data").stdout
    assert all(name in listing for name in table_names())


def test_doctor_reports_the_environment():
    assert "tables:" in fewnm("doctor").stdout
