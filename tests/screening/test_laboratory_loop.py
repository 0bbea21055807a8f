"""The loop as a laboratory runs it: plan, measure, rank again, by the command line."""

import json
import subprocess
import sys

import pandas as pd
import pytest

SPECIFICATION = """
[target]
window_nm = [610, 650]

[candidates]
materials = ["CdSe", "InP", "ZnTe", "CdTe"]
diameter_nm = [2.0, 7.0]
step_nm = 0.1

[laboratory]
results = "results.csv"

[plan]
samples = 4
random_share = 0.25
"""
RESULTS = """material,diameter_nm,diameter_sd_nm,property,value,value_sd,method,date,sample
CdSe,5.2,0.1,emission_nm,634,2,microscopy,2026-03-02,a1
ZnTe,4.6,0.1,optical_gap_eV,2.50,0.02,microscopy,2026-03-04,b1
"""


def fewnm(folder, *arguments):
    call = "from screening.cli import main; main()"
    return subprocess.run(
        [sys.executable, "-c", call, *arguments],
        cwd=folder,
        capture_output=True,
        text=True,
        check=False,
    )


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    folder = tmp_path_factory.mktemp("laboratory")
    (folder / "spec.toml").write_text(SPECIFICATION)
    (folder / "results.csv").write_text(RESULTS)
    return folder


@pytest.fixture(scope="module")
def ranked(folder):
    done = fewnm(folder, "rank", "spec.toml", "--out", "run")
    assert done.returncode == 0, done.stderr
    return folder / "run"


def test_results_named_in_the_specification_join_and_stay_as_they_are(folder, ranked):
    own = pd.read_csv(ranked / "own_results.csv")
    assert own["material"].tolist() == ["CdSe", "ZnTe"]
    assert own["p_value"].between(0.0, 1.0).all()
    assert (folder / "results.csv").read_text() == RESULTS
    assert own["record_state"].tolist() == ["on record", "new"]


def test_the_report_shows_before_and_after(ranked):
    page = (ranked / "report.html").read_text()
    assert "What your results changed" in page
    assert "The first rows of the shortlist without your results" in page


def test_the_model_of_a_run_with_results_has_another_hash(folder, ranked):
    plain = folder / "plain.toml"
    plain.write_text(SPECIFICATION.replace('results = "results.csv"', ""))
    assert fewnm(folder, "rank", "plain.toml", "--out", "plain").returncode == 0
    hashes = [
        json.loads((path / "manifest.json").read_text())["model_hash"]
        for path in (ranked, folder / "plain")
    ]
    assert hashes[0] != hashes[1]


def test_a_plan_is_printed_without_a_folder_and_written_with_one(folder):
    printed = fewnm(folder, "plan", "spec.toml", "--samples", "3")
    assert printed.returncode == 0, printed.stderr
    assert printed.stdout.count("\n") == 3
    written = fewnm(folder, "plan", "spec.toml", "--policy", "teach", "--out", "next")
    assert written.returncode == 0, written.stderr
    plan = pd.read_csv(folder / "next" / "plan.csv")
    assert len(plan) == 4
    assert plan["is_random"].sum() == 1
    assert json.loads((folder / "next" / "plan.json").read_text())["kind"] == "plan"


def test_faulty_results_end_with_all_faults_and_nothing_written(folder):
    bad = folder / "bad.csv"
    bad.write_text("material,diameter_nm,property,value\nCdSe,52,emission_nm,634\nXx,5,hue,1\n")
    done = fewnm(folder, "rank", "spec.toml", "--results", "bad.csv", "--out", "never")
    assert done.returncode == 3
    assert "row 2" in done.stderr
    assert "row 3" in done.stderr
    assert not (folder / "never").exists()


def test_results_for_a_catalyst_are_refused_in_words(folder):
    done = fewnm(folder, "rank", "oxygen-reduction", "--results", "results.csv", "--out", "no")
    assert done.returncode == 4
    assert "own results cannot be used for this target" in done.stderr
    assert not (folder / "no").exists()
