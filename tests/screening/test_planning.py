import dataclasses

import numpy as np
import pandas as pd
import pytest

from features.errors import NothingQualifiesError, SpecificationError
from screening.planning import PLAN_COLUMNS, plan_samples
from screening.ranking import rank
from screening.specification import parse_specification

RED = {
    "target": {"window_nm": [620, 640]},
    "candidates": {"diameter_nm": [2.0, 8.0], "step_nm": 0.1},
}


@pytest.fixture(scope="module")
def result(model):
    return rank(parse_specification(RED), model)


def planned(result, results=None, **rules):
    specification = parse_specification(RED | {"plan": rules})
    return plan_samples(dataclasses.replace(result, specification=specification), results)


def test_a_plan_has_the_promised_columns_reasons_and_cautions(result):
    plan = planned(result)
    assert tuple(plan.columns) == PLAN_COLUMNS
    assert plan["sample"].tolist() == [1, 2, 3, 4, 5, 6]
    assert plan["reason"].str.len().gt(20).all()
    assert plan["cautions"].str.contains("safety data sheet").all()


def test_the_chance_that_one_lands_never_falls_and_is_no_less_than_the_best_alone(result):
    plan = planned(result, random_share=0.0)
    assert plan["chance_of_one"].is_monotonic_increasing
    assert plan["chance_of_one"].iloc[-1] >= plan["chance_in_window"].max() - 0.05


def test_the_stated_share_is_drawn_at_random_inside_the_window(result):
    plan = planned(result, samples=10, random_share=0.3)
    drawn = plan[plan["is_random"]]
    assert len(drawn) == 3
    low, high = result.specification.target.energies_eV
    assert drawn["emission_eV"].between(low, high).all()


@pytest.mark.parametrize("policy", ["hit", "approach", "edge", "teach"])
def test_samples_of_one_material_are_few_and_apart(result, policy):
    plan = planned(result, policy=policy, samples=8, per_material=2, spacing_nm=0.5)
    for _, part in plan.groupby("material"):
        assert len(part) <= 2
        assert np.diff(np.sort(part["diameter_nm"])).min(initial=1.0) >= 0.5 - 1e-9


def test_a_batch_for_a_hit_is_likelier_to_land_than_one_for_learning(result):
    chances = {
        policy: planned(result, policy=policy, random_share=0.0)["chance_of_one"].iloc[-1]
        for policy in ("hit", "teach")
    }
    assert chances["hit"] > chances["teach"]


def test_a_plan_for_learning_prefers_what_is_least_known(result):
    plan = planned(result, policy="teach", random_share=0.0)
    assert plan["record_state"].iloc[0] == "new"


def test_a_dear_material_is_passed_over(result):
    cheap = planned(result, random_share=0.0)
    first = cheap["material"].iloc[0]
    dear = planned(result, random_share=0.0, costs={first: 1000.0})
    assert dear["material"].iloc[0] != first


def test_only_sizes_that_can_be_made_are_proposed(result):
    plan = planned(result, sizes_nm=[3.0, 4.0, 5.0, 6.0])
    assert set(plan["diameter_nm"].round(6)) <= {3.0, 4.0, 5.0, 6.0}


def test_sizes_made_already_are_not_proposed_again(result):
    first = planned(result).iloc[0]
    made = pd.DataFrame(
        {
            "material": [first["material"]],
            "diameter_nm": [first["diameter_nm"]],
            "optical_gap_eV": [2.0],
            "family": ["II-VI"],
        }
    )
    again = planned(result, made)
    same = again[again["material"].eq(first["material"])]
    assert (same["diameter_nm"] - first["diameter_nm"]).abs().min() > 0.1


def test_the_same_plan_comes_twice(result):
    pd.testing.assert_frame_equal(planned(result), planned(result))


def test_nothing_to_plan_with_is_said(result):
    with pytest.raises(NothingQualifiesError, match="no candidate is left to plan with"):
        planned(result, sizes_nm=[0.7])


@pytest.mark.parametrize(
    ("rules", "words"),
    [
        ({"random_share": 0.6}, "less than or equal to 0.5"),
        ({"samples": 0}, "greater than or equal to 1"),
        ({"policy": "luck"}, "'hit', 'approach', 'edge' or 'teach'"),
        ({"costs": {"CdSe": -1.0}}, "greater than 0"),
    ],
)
def test_rules_that_cannot_be_followed_are_refused(rules, words):
    with pytest.raises(SpecificationError, match=words):
        parse_specification(RED | {"plan": rules})
