import numpy as np
import pandas as pd
import pytest

from features.errors import NothingQualifiesError, SpecificationError
from screening.candidates import candidate_grid, pair_frame
from screening.dots import ON_RECORD
from screening.ranking import COLUMNS, caution_column, rank
from screening.scores import Window, describe, score
from screening.specification import Candidates, parse_specification

RED = {"target": {"window_nm": [625, 635]}, "laboratory": {"size_spread": 0.06}}
FAST = {"diameter_nm": [2.0, 8.0], "step_nm": 0.25}

GRID = candidate_grid(["CdSe", "ZnTe", "CsPbBr3"], Candidates(diameter_nm=[2.0, 8.0], step_nm=0.5))


@pytest.fixture(scope="module")
def result(model):
    return rank(parse_specification(RED | {"candidates": FAST}), model)


def test_the_shortlist_has_the_promised_columns_and_falls_in_chance(result):
    assert tuple(result.shortlist.columns) == COLUMNS
    assert result.shortlist["rank"].tolist() == list(range(1, len(result.shortlist) + 1))
    assert result.shortlist["chance_in_window"].is_monotonic_decreasing


def test_scores_are_probabilities_and_intervals_hold_their_centre(result):
    for name in ("chance_in_window", "fraction_in_window"):
        assert result.scored[name].between(0.0, 1.0).all()
    listed = result.shortlist
    assert (listed["optical_gap_low_eV"] < listed["optical_gap_eV"]).all()
    assert (listed["optical_gap_eV"] < listed["optical_gap_high_eV"]).all()


def test_cdse_is_a_likely_red_emitter(result):
    # CdSe of about 5 to 6.5 nm emits at 630 nm (common practice).
    cdse = result.shortlist[result.shortlist["material"].eq("CdSe")].iloc[0]
    assert 4.5 < cdse["diameter_nm"] < 7.0
    assert cdse["record_state"] == ON_RECORD
    assert cdse["nearest_source"].startswith("CdSe")


def test_every_row_carries_cautions_that_defer_and_never_promise_safety(result):
    for text in result.shortlist["cautions"]:
        assert "safety data sheet" in text
        assert "local codes" in text
        assert "is safe" not in text


def test_excluded_elements_are_rejected_with_the_reason(model):
    candidates = FAST | {"exclude_elements": ["Cd", "Pb"]}
    result = rank(parse_specification(RED | {"candidates": candidates}), model)
    assert not result.shortlist["material"].str.contains("Cd|Pb").any()
    reasons = result.rejected.set_index("material")["reason"]
    assert reasons["CdSe"] == "contains excluded Cd"


def test_a_wider_window_is_never_less_likely(model):
    described = describe(model, GRID, 0.06)
    narrow = score(model, described, Window("emission", 1.95, 1.98))
    wide = score(model, described, Window("emission", 1.90, 2.03))
    assert (wide["chance_in_window"] >= narrow["chance_in_window"]).all()
    assert (wide["fraction_in_window"] >= narrow["fraction_in_window"]).all()


def test_chances_of_windows_side_by_side_add_up(model):
    described = describe(model, GRID, 0.06)
    parts = [
        score(model, described, Window("optical_gap", a, b)) for a, b in ((1.5, 2.0), (2.0, 2.6))
    ]
    whole = score(model, described, Window("optical_gap", 1.5, 2.6))
    np.testing.assert_allclose(
        parts[0]["chance_in_window"] + parts[1]["chance_in_window"],
        whole["chance_in_window"],
        atol=1e-12,
    )


def test_drifting_by_the_tolerance_reaches_the_edge_of_the_window(model):
    window = Window("optical_gap", 2.10, 2.30)
    pair = pair_frame(pd.DataFrame({"material": ["CdSe"], "diameter_nm": [3.3]}))
    here = score(model, describe(model, pair, 0.05), window).iloc[0]
    assert here["size_tolerance_nm"] > 0
    gaps = [
        describe(model, pair.assign(diameter_nm=3.3 + sign * here["size_tolerance_nm"]), 0.05)[
            "optical_gap_eV"
        ].iloc[0]
        for sign in (-1.0, 1.0)
    ]
    distance = min(abs(gap - edge) for gap in gaps for edge in (2.10, 2.30))
    # The tolerance is linear in the slope; curvature over it stays within a few meV.
    assert distance < 0.02


def test_the_order_of_materials_does_not_change_the_ranking(model):
    names = ["CdSe", "InP", "CsPbI3", "CuInS2"]
    first, second = (
        rank(
            parse_specification(RED | {"candidates": FAST | {"materials": order}}), model
        ).shortlist
        for order in (names, names[::-1])
    )
    pd.testing.assert_frame_equal(first, second)


@pytest.mark.parametrize(
    ("candidates", "error", "message"),
    [
        ({"materials": ["Unobtainium"]}, SpecificationError, "candidates.materials"),
        ({"materials": ["CuAu"]}, SpecificationError, "all constituents are metals"),
        ({"families": ["metals"]}, SpecificationError, "unknown family 'metals'.*III-V"),
        ({"materials": ["CdSe"], "exclude_elements": ["Cd"]}, NothingQualifiesError, "no material"),
        ({"materials": ["ZnO"]}, NothingQualifiesError, "no candidate qualifies"),
    ],
)
def test_what_cannot_be_ranked_is_explained(model, candidates, error, message):
    with pytest.raises(error, match=message):
        rank(parse_specification(RED | {"candidates": FAST | candidates}), model)


def test_the_result_shows_itself(result):
    assert result.to_frame().equals(result.shortlist)
    assert "<table" in result._repr_html_()
    assert 0.0 < result.chance_of_one() <= 1.0


def test_an_indirect_gap_is_told_beside_the_cautions():
    silicon, selenide = caution_column(pd.Series(["Si", "CdSe"]))
    assert silicon.startswith("indirect bulk gap")
    assert "indirect" not in selenide


def test_the_emission_interval_holds_the_spread_behind_its_chance(model):
    # A window equal to the 90 % interval must have a chance of 90 %: bars and chances agree.
    described = describe(model, GRID, 0.06)
    row = described[described["material"].eq("CdSe")].iloc[[4]]
    window = Window("emission", row["emission_low_eV"].item(), row["emission_high_eV"].item())
    assert score(model, row, window)["chance_in_window"].item() == pytest.approx(0.9, abs=1e-9)
    gap_width = row["optical_gap_high_eV"] - row["optical_gap_low_eV"]
    assert (row["emission_high_eV"] - row["emission_low_eV"] > gap_width).all()


def test_solid_solutions_and_unmeasured_compounds_compete_and_say_so(model):
    candidates = FAST | {"materials": ["CdSe0.6S0.4", "CdSe", "ZnGeP2"]}
    wide = {"target": {"window_eV": [1.6, 2.6]}, "candidates": candidates}
    listed = rank(parse_specification(wide), model).shortlist.set_index("material")
    assert listed["bulk_basis"].to_dict() == {
        "CdSe0.6S0.4": "alloy",
        "CdSe": "record",
        "ZnGeP2": "model",
    }
    assert listed["record_state"]["ZnGeP2"] == "new"
