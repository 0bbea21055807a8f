"""Files, words and pages of an audit, from left-out predictions made up here."""

import json
import re
import subprocess
import sys
import xml.etree.ElementTree as ET

import numpy as np
import pandas as pd
import pytest
from scipy.stats import norm

from screening.audit_words import distance_words, parsed, targets, under_coverage_words, verdicts
from screening.audited import audited_figures
from screening.auditing import Audit, audit_text, write_audit
from screening.calibration import LEVELS
from screening.dot_baselines import BASELINES
from screening.left_out import adsorption_table, emission_table

FAMILIES = ["II-VI", "III-V", "<b>&</b>"]


def predictions(split, state, sd, lead=0.1, n=90):
    """Return emission predictions with normal errors and baselines that err by `lead` more."""
    rng = np.random.default_rng(n)
    frame = pd.DataFrame({"record": [f"r{i}" for i in range(n)]})
    frame["material"] = [f"m{i % 15}" for i in range(n)]
    frame["family"] = [FAMILIES[i % 3] for i in range(n)]
    frame["diameter_nm"] = rng.uniform(1.5, 9.9, n)
    frame["confidence"], frame["vote"] = "high", 1.0
    frame["kernel_distance"], frame["family_on_record"] = rng.uniform(0.0, 0.5, n), True
    frame["reach"] = np.where(frame["kernel_distance"] < 0.25, "near", "edge")
    frame["split"], frame["state"] = split, state
    frame["predicted_gap_eV"] = rng.uniform(1.0, 3.0, n)
    error = sd * rng.normal(size=n)
    frame["optical_gap_eV"] = frame["predicted_gap_eV"] + error
    for level in LEVELS:
        half = 0.1 * norm.ppf(0.5 + level / 2.0)
        frame[f"low_{100 * level:.0f}"] = frame["predicted_gap_eV"] - half
        frame[f"high_{100 * level:.0f}"] = frame["predicted_gap_eV"] + half
    for name in BASELINES:
        frame[name] = frame["predicted_gap_eV"] - lead * np.sign(error)
    return frame


def metals():
    rng = np.random.default_rng(5)
    frame = pd.DataFrame({"group": [f"X{i}" for i in range(20)], "adsorbate": "O"})
    frame["material"], frame["model"] = frame["group"], rng.normal(size=20)
    frame["energy_eV"] = frame["model"] + 0.2 * rng.normal(size=20)
    for level in LEVELS:
        half = 0.2 * norm.ppf(0.5 + level / 2.0)
        frame[f"low_{level:.0%}"], frame[f"high_{level:.0%}"] = (
            frame["model"] - half,
            frame["model"] + half,
        )
    frame["mean"] = frame["model"] + 1.0
    return frame


@pytest.fixture(scope="module")
def audit():
    emission = [
        predictions("size ranges", "on record", 0.1),
        predictions("materials", "new", 0.3, lead=-0.05),
    ]
    table = pd.concat([emission_table(pd.concat(emission)), adsorption_table({"metals": metals()})])
    table = table.reset_index(drop=True).astype({"family_on_record": "boolean"})
    figures = audited_figures(table)
    return Audit("A <title>", table, figures, pd.DataFrame(), ("a <b>warning</b>",), "0123")


@pytest.fixture(scope="module")
def folder(audit, tmp_path_factory):
    path = tmp_path_factory.mktemp("audit")
    write_audit(audit, path)
    return path


def test_every_promised_file_is_written_and_in_the_manifest(folder):
    manifest = json.loads((folder / "manifest.json").read_text(encoding="utf-8"))
    written = {path.name for path in folder.iterdir()}
    assert written == set(manifest["files"]) | {"manifest.json"}
    promised = {"audit.html", "audit.json", "predictions.parquet", "held_out_figures.csv"}
    assert promised | {"reliability.svg", "coverage.svg", "distance.svg", "pit.svg"} <= written


def test_a_figure_can_be_recomputed_from_the_predictions_alone(folder):
    table = pd.read_parquet(folder / "predictions.parquet")
    rows = table[table["split"].eq("materials")]
    inside = rows["observed_eV"].between(rows["low_90_eV"], rows["high_90_eV"])
    error = (rows["predicted_eV"] - rows["observed_eV"]).abs()
    figures = pd.read_csv(folder / "held_out_figures.csv").set_index("figure")["value"]
    for name, values in (("coverage_90", inside), ("mean_absolute_error_eV", error)):
        by_material = values.astype(float).groupby(rows["material"]).mean()
        expected = figures[f"{name}, emission, materials"]
        assert by_material.mean() == pytest.approx(expected, rel=1e-5)


def test_the_same_audit_gives_the_same_bytes(audit, folder, tmp_path):
    write_audit(audit, tmp_path)
    for path in folder.iterdir():
        if path.suffix != ".parquet":
            assert (tmp_path / path.name).read_bytes() == path.read_bytes(), path.name


def test_the_page_allows_no_script_and_no_network_and_escapes_names(folder):
    page = (folder / "audit.html").read_text(encoding="utf-8")
    policy = re.search(r'Content-Security-Policy" content="([^"]*)"', page)[1]
    assert policy.startswith("default-src 'none'")
    assert "script-src" not in policy
    assert "<script" not in page
    assert not re.search(r'(src|href)="(?!#)', page)
    assert " style=" not in page
    for raw in ("A <title>", "<b>&</b>", "a <b>warning"):
        assert raw not in page


def test_window_reliability_is_the_first_figure(folder):
    page = (folder / "audit.html").read_text(encoding="utf-8")
    first = page.index("<figure>")
    assert "Window reliability" in page[:first].rsplit("<h2>", 1)[1]


def test_figures_are_whole_svg_documents(folder):
    for path in folder.glob("*.svg"):
        root = ET.fromstring(path.read_text(encoding="utf-8"))  # noqa: S314 - written by this run
        assert root.tag.endswith("svg"), path.name
        assert root.find("{http://www.w3.org/2000/svg}title") is not None, path.name


def test_the_json_holds_no_nan_and_every_figure(audit, folder):
    text = (folder / "audit.json").read_text(encoding="utf-8")
    content = json.loads(text, parse_constant=pytest.fail)
    assert len(content["figures"]) == len(audit.figures)
    assert {t["promise"] for t in content["targets"]} == {t.promise for t in audit.targets}


def test_the_summary_has_one_line_a_split(audit):
    lines = audit_text(audit).splitlines()
    assert len(lines) == 1 + 3
    assert "in_90" in lines[0]


def test_the_verdict_says_where_a_baseline_is_better_and_where_not(audit):
    said = verdicts(parsed(audit.figures))
    assert len(said) == 3
    by_split = {line.split(",")[1].split(" left")[0].strip(): line for line in said}
    assert "the baseline is better" in by_split["materials"]
    assert "the model is better" in by_split["metals"]


def test_overconfident_parts_are_named_in_words(audit):
    said = under_coverage_words(parsed(audit.figures))
    assert any("materials left out (new), family II-VI" in line for line in said)
    assert any("size 2 to 3 nm" in line for line in said)
    assert not any("metals" in line for line in said)


def test_error_is_told_by_reach(audit):
    said = distance_words(parsed(audit.figures))
    assert any(line.startswith("emission, materials left out (new): error near") for line in said)


def test_promises_are_held_against_the_figures(audit):
    found = {target.promise: target for target in targets(parsed(audit.figures))}
    on_record = found["90 % intervals hold 87% to 93%, size ranges left out (on record)"]
    rows = audit.figures.set_index(["figure", "state"])
    value = rows.loc[("coverage_90, emission, size ranges", "on record"), "value"]
    assert on_record.reached == (0.87 <= value <= 0.93)
    assert not found["90 % intervals hold 85% to 95%, materials left out (new)"].reached
    assert not found["the model is better than the best baseline, materials left out"].reached
    assert found["the model is better than the best baseline, metals left out"].reached


def fewnm(*arguments):
    command = [sys.executable, "-c", "from screening.cli import main; main()", *arguments]
    return subprocess.run(command, capture_output=True, text=True, check=False)


def test_a_faulty_table_of_the_users_ends_with_code_three_and_writes_nothing(tmp_path):
    table = tmp_path / "mine.csv"
    table.write_text(
        "material,diameter_nm,energy_eV,energy_kind\nCdSe,0.5,2.0,emission\nXx,3,2.0,emission\n",
        encoding="utf-8",
    )
    done = fewnm("audit", "--out", str(tmp_path / "out"), "--table", str(table))
    assert done.returncode == 3
    assert "row 2: diameter_nm" in done.stderr
    assert "row 3: material" in done.stderr
    assert not (tmp_path / "out").exists()


def test_too_few_groups_decide_no_promise_and_no_lead():
    few = predictions("materials", "new", 0.3, n=90).query("material in ['m0', 'm1', 'm2']")
    figures = parsed(audited_figures(emission_table(few), fewest_groups=1))
    assert targets(figures) == []
    (said,) = verdicts(figures)
    assert "too few groups for an interval: 3" in said
    assert "nan" not in said
