"""The nested evaluation of the bulk gap."""

import numpy as np
import pandas as pd
import pytest

import screening.bulk_gap_audit as audit
from features.alloys import alloy_gap
from features.formula import parse_formula
from screening.bulk_gap import BulkGapModel
from screening.bulk_gap_audit import BASELINES, evaluate_bulk_gap, summarise_bulk_gap
from screening.bulk_gap_rows import gap_rows


@pytest.fixture(scope="module")
def few_rows():
    rows = gap_rows()
    kept = (rows["table"] == "bulk_semiconductors") | (np.arange(len(rows)) % 8 == 0)
    return rows[kept].reset_index(drop=True)


@pytest.fixture(scope="module")
def trained_on():
    return []


@pytest.fixture(scope="module")
def evaluation(few_rows, trained_on):
    class Watched(BulkGapModel):
        def fit(self, rows=None):
            trained_on.append(set(rows["chemical_system"]))
            return super().fit(rows)

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(audit, "BulkGapModel", Watched)
        return evaluate_bulk_gap(2, rows=few_rows)


def test_every_row_of_the_compilation_is_predicted_once(evaluation, few_rows):
    compiled = few_rows[few_rows["table"] == "bulk_gaps"]
    assert sorted(evaluation["material"]) == sorted(compiled["material"])
    assert np.isfinite(evaluation[["model", "sd_eV", *BASELINES]].to_numpy()).all()


def test_no_model_has_seen_a_chemical_system_that_it_predicts(evaluation, trained_on):
    for fold, part in evaluation.groupby("fold"):
        assert trained_on[fold].isdisjoint(part["chemical_system"])


def test_model_beats_the_mean_and_the_nearest_composition(evaluation):
    summary = summarise_bulk_gap(evaluation).set_index("figure")["value"]
    error = {n: summary[f"mean absolute error, {n}, eV"] for n in ("model", *BASELINES)}
    assert error["model"] < error["nearest composition"]
    assert error["model"] < error["mean"]


def test_alloys_answer_by_the_rules_and_all_else_by_the_model(evaluation):
    for row in evaluation.itertuples():
        rule = alloy_gap(parse_formula(row.material))
        assert row.answer == (row.model if rule is None else max(rule[0], 0.0))


def test_coverage_counts_one_vote_a_chemical_system():
    table = pd.DataFrame(
        {"chemical_system": ["a", "a", "a", "b"], "gap_eV": [1.0, 1.0, 1.0, 5.0]}
        | dict.fromkeys(("model", "answer", *BASELINES), 1.0)
        | {f"low_{p}%": 0.0 for p in (50, 80, 90)}
        | {f"high_{p}%": 2.0 for p in (50, 80, 90)}
    )
    summary = summarise_bulk_gap(table).set_index("figure")["value"]
    assert summary["coverage of 90%, by rows"] == pytest.approx(3 / 4)
    assert summary["coverage of 90%, one vote a chemical system"] == pytest.approx(1 / 2)
    assert summary["mean absolute error, model, eV"] == pytest.approx(1.0)
