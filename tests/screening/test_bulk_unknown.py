"""Particles of left-out compounds with the bulk known and with nothing known."""

import numpy as np
import pytest

import screening.bulk_unknown as unknown
from features.formula import parse_formula
from features.size_gap import training_rows
from screening.bulk_estimate import QUANTITIES, BulkConstantsModel
from screening.bulk_unknown import (
    ESTIMATED,
    KNOWN,
    estimated_constants,
    evaluate_unknown_bulk,
    summarise_unknown_bulk,
)

# Three quarters of the materials' gaps, so that estimates differ visibly from the record.
FACTOR, SD_EV = 0.75, 0.4


@pytest.fixture(scope="module")
def rows():
    rows = training_rows()
    # Every material with at most four records: enough groups, little time.
    return rows.groupby("material").head(4).reset_index(drop=True)


@pytest.fixture(scope="module")
def left_out():
    return []


@pytest.fixture(scope="module")
def evaluation(rows, left_out):
    gaps = rows.groupby("material")["gap_eV"].first()

    def gaps_without(systems, seed):
        left_out.append(set(systems))
        return lambda formulas: (
            FACTOR * np.maximum(gaps[list(formulas)].to_numpy(), 0.1),
            np.full(len(formulas), SD_EV),
        )

    return evaluate_unknown_bulk(2, rows=rows, gaps_without=gaps_without)


def test_every_record_is_predicted_once_a_case(evaluation, rows):
    for bulk in (KNOWN, ESTIMATED):
        part = evaluation[evaluation["bulk"] == bulk]
        assert sorted(part["record"]) == sorted(rows["record"])
        assert np.isfinite(part["predicted_gap_eV"]).all()


def test_chemical_systems_are_left_out_whole(rows, left_out, evaluation):
    systems = {parse_formula(material).chemical_system for material in rows["material"]}
    assert left_out[0].isdisjoint(left_out[1])
    assert left_out[0] | left_out[1] == systems


def test_unknown_bulk_widens_the_intervals_by_at_least_the_spread_of_the_bulk_gap(evaluation):
    width = evaluation["high_90%"] - evaluation["low_90%"]
    known = width[evaluation["bulk"] == KNOWN].to_numpy()
    estimated = width[evaluation["bulk"] == ESTIMATED].to_numpy()
    assert (estimated > 2 * 1.64 * SD_EV).all()
    assert estimated.mean() > known.mean()


def test_wrong_bulk_gaps_cost_accuracy(evaluation):
    summary = summarise_unknown_bulk(evaluation)
    error = summary["mean_absolute_error_eV"]
    assert error[ESTIMATED] > error[KNOWN]
    levels = summary[["coverage_50%", "coverage_80%", "coverage_90%"]]
    assert levels.apply(lambda row: row.is_monotonic_increasing, axis=1).all()


def test_summary_counts_one_vote_a_material(evaluation):
    part = evaluation.assign(predicted_gap_eV=evaluation["optical_gap_eV"])
    first = part["material"].iloc[0]
    part.loc[part["material"] == first, "predicted_gap_eV"] += 1.0
    error = summarise_unknown_bulk(part)["mean_absolute_error_eV"]
    assert error.to_numpy() == pytest.approx(1.0 / part["material"].nunique())


def test_estimates_of_constants_need_the_composition_only():
    model = BulkConstantsModel().fit(leave_out={"Cd-Se"})
    frame = estimated_constants(["CdSe"], lambda _: (np.array([1.7]), np.array([0.3])), model)
    assert frame.loc["CdSe", "family"] == "II-VI"
    assert frame.loc["CdSe", ["gap_eV", "gap_sd_eV"]].tolist() == [1.7, 0.3]
    assert (frame[list(QUANTITIES)] > 0.0).all(axis=None)


def test_gaps_of_left_out_systems_come_from_a_model_that_never_saw_them(monkeypatch):
    seen = []

    class Watched:
        def __init__(self, seed):
            self.seed = seed

        def fit(self, rows):
            seen.extend(rows["chemical_system"].unique())
            return self

        def predict_new(self, formulas):
            one = np.ones(len(formulas))
            return 2 * one, one, 3 * one, 0.5 * one

    monkeypatch.setattr(unknown, "BulkGapModel", Watched)
    gap_eV, sd_eV = unknown._gaps_without({"Cd-Se"}, 0)(["CdSe"])
    assert "Cd-Se" not in seen
    assert "Cd-S-Se" not in seen  # it holds CdSe0.99S0.01
    assert {"Cd-Te", "Se-Zn"} <= set(seen)
    assert (gap_eV.tolist(), sd_eV.tolist()) == ([2.0], [0.5])
