from datetime import date

import numpy as np
import pandas as pd
import pytest

from features.errors import NothingQualifiesError, SpecificationError
from screening.limit_rules import Limits
from screening.limits import FAIL, PASS, REJECTED, UNSURE, check_limits, judge
from screening.ranking import rank
from screening.specification import parse_specification

RED = {
    "target": {"window_nm": [600, 660]},
    "candidates": {"diameter_nm": [2.0, 8.0], "step_nm": 0.25},
}


def frame(materials, diameters, **columns):
    table = pd.DataFrame({"material": materials, "diameter_nm": diameters, **columns})
    return table.assign(chance_in_window=0.5)


def verdict(limits, material, diameter_nm=4.0, **columns):
    return int(judge(frame([material], [diameter_nm], **columns), limits).verdicts[0, 0])


# Every limit: one candidate that passes, one that fails, and one of which nothing sure can be said
# where such a state exists. Cadmium, lead and mercury are restricted in the European Union
# (directive 2011/65); gold below about 2 nm is molecular; iron particles of some nanometres are
# superparamagnetic and those of 60 nm are not; tin melts at 505 K and platinum at 2041 K in bulk
# (common practice).
CASES = [
    ({"diameter_nm": [2, 6]}, ("CdSe", 4.0), ("CdSe", 7.0), None),
    ({"highest_hazard_class": 3}, ("ZnS", 4.0), ("CdSe", 4.0), ("Si", 4.0)),
    ({"restricted_substances": True}, ("InP", 4.0), ("PbS", 4.0), None),
    ({"highest_supply_class": 2}, ("ZnS", 4.0), ("InP", 4.0), ("UO2", 4.0)),
    ({"highest_price_class": 3}, ("ZnS", 4.0), ("Pt", 4.0), ("UO2", 4.0)),
    ({"operating_temperature_K": 400}, ("Pt", 5.0), ("Sn", 5.0), ("CdSe", 5.0)),
    ({"operating_temperature_K": 600}, ("Pt", 5.0), ("Sn", 5.0), ("Au", 4.0)),
    ({"operating_temperature_K": 400, "survive": "melting"}, ("Pt", 5.0), ("Ga", 5.0), ("Au", 1.2)),
    ({"metallic": "required"}, ("Au", 4.0), ("Au", 1.2), ("Au", 1.85)),
    ({"metallic": "excluded"}, ("Au", 1.2), ("Au", 4.0), ("Os", 4.0)),
    ({"superparamagnetic": "required"}, ("Fe", 8.0), ("Fe", 60.0), ("Fe", 18.0)),
    ({"superparamagnetic": "excluded"}, ("Au", 8.0), ("Fe", 8.0), ("FeRh", 8.0)),
]


@pytest.mark.parametrize(("asked", "good", "bad", "doubtful"), CASES)
def test_a_limit_is_passed_failed_or_left_unsure(asked, good, bad, doubtful):
    limits = Limits.model_validate(asked)
    assert verdict(limits, *good) == PASS
    assert verdict(limits, *bad) == FAIL
    if doubtful is not None:
        assert verdict(limits, *doubtful) == UNSURE


OPTICAL = [
    ({"highest_fwhm_meV": 100.0}, {"fwhm_meV": [80.0]}, {"fwhm_meV": [120.0]}),
    (
        {"least_size_tolerance_nm": 0.2},
        {"size_tolerance_nm": [0.3]},
        {"size_tolerance_nm": [0.1]},
    ),
]


@pytest.mark.parametrize(("asked", "good", "bad"), OPTICAL)
def test_optical_limits_are_passed_or_failed_at_their_value(asked, good, bad):
    limits = Limits.model_validate(asked)
    assert verdict(limits, "CdSe", **good) == PASS
    assert verdict(limits, "CdSe", **bad) == FAIL


def test_every_limit_has_a_case():
    tried = {name for asked, *_ in CASES + OPTICAL for name in asked}
    everything = Limits(
        diameter_nm=[1, 2],
        highest_fwhm_meV=1,
        least_size_tolerance_nm=1,
        highest_hazard_class=1,
        restricted_substances=True,
        highest_supply_class=1,
        highest_price_class=1,
        operating_temperature_K=1,
        metallic="required",
        superparamagnetic="required",
    )
    assert set(everything.asked()) <= tried


def test_a_margin_in_sigmas_turns_a_pass_into_unsure():
    materials, diameters = ["Au"], [4.0]
    near = [
        judge(
            frame(materials, diameters),
            Limits(operating_temperature_K=500, margin_sigmas=margin),
        ).verdicts[0, 0]
        for margin in (0.5, 3.0)
    ]
    assert near == [PASS, UNSURE]


def test_a_melting_limit_knows_that_particles_melt_below_bulk():
    # Bulk tin melts at 505 K; particles of 5 nm near 440 K (common practice: far below bulk).
    assert verdict(Limits(operating_temperature_K=500, survive="melting"), "Sn", 200.0) != FAIL
    hot = Limits(operating_temperature_K=560, survive="melting", margin_sigmas=1.0)
    assert verdict(hot, "Sn", 4.0) == FAIL


def test_what_is_unsure_is_kept_or_rejected_as_asked():
    table = frame(["Pt", "CdSe"], [4.0, 4.0])
    kept = judge(table, Limits(operating_temperature_K=500))
    assert kept.allowed.tolist() == [True, True]
    strict = judge(table, Limits(operating_temperature_K=500, unsure="reject"))
    assert strict.allowed.tolist() == [True, False]
    assert strict.rejected(table)["verdict"].tolist() == ["unsure"]


def test_rejected_rows_say_limit_reason_and_what_is_lost():
    table = frame(["CdSe", "CdSe", "InP"], [4.0, 7.0, 7.0]).assign(chance_in_window=[0.2, 0.9, 0.1])
    rejected = judge(table, Limits(diameter_nm=[2, 6])).rejected(table)
    assert tuple(rejected.columns) == REJECTED
    cdse = rejected.set_index("material").loc["CdSe"]
    assert (cdse["n_rejected"], cdse["n_sizes"], cdse["chance_in_window"]) == (1, 2, 0.9)
    assert cdse["reason"] == "7 nm, allowed 2 to 6"


def test_notes_name_only_what_is_unsure():
    table = frame(["Pt", "Au"], [4.0, 4.0])
    notes = judge(table, Limits(operating_temperature_K=600)).notes([0, 1])
    assert notes[0] == "all limits met"
    assert notes[1].startswith("unsure: operating_temperature_K (chance 0.")


def test_a_shell_thins_the_share_of_a_restricted_element():
    shell = {"material": "ZnS", "thickness_nm": 2.0}
    bare = check_limits(frame(["CdSe"], [4.0]), Limits(restricted_substances=True))[0]
    coated = check_limits(
        frame(["CdSe"], [4.0]),
        Limits.model_validate({"restricted_substances": True, "shell": shell}),
    )[0]
    shares = [float(check.words(0).split()[1]) for check in (bare, coated)]
    # Cd is 58.7 % of CdSe by mass: 112.41 / (112.41 + 78.97).
    assert shares[0] == pytest.approx(58.7, abs=0.1)
    assert shares[1] < shares[0] / 3.0


def test_a_running_exemption_makes_a_restricted_element_unsure_and_an_ended_one_does_not():
    # Exemption 39(b) of directive 2011/65 for cadmium on the chip runs to 2027-12-31.
    day = {"restricted_substances": True, "exemptions_on": date(2027, 1, 1)}
    assert verdict(Limits.model_validate(day), "CdSe") == UNSURE
    later = day | {"exemptions_on": date(2028, 1, 1)}
    assert verdict(Limits.model_validate(later), "CdSe") == FAIL
    assert verdict(Limits.model_validate(day), "PbS") == FAIL


def test_a_missing_density_is_unsure_and_can_be_given():
    shell = {"material": "Cu2S", "thickness_nm": 1.0}
    asked = {"restricted_substances": True, "shell": shell}
    assert verdict(Limits.model_validate(asked), "CdSe") == UNSURE
    given = {"restricted_substances": True, "shell": shell | {"density_g_cm3": 5.6}}
    assert verdict(Limits.model_validate(given), "CdSe") == FAIL


@pytest.mark.parametrize(
    ("limits", "words"),
    [
        ({"metallic": "required"}, "no meaning for the target emission"),
        ({"superparamagnetic": "excluded"}, "no meaning for the target emission"),
        ({"diameter_nm": [5, 2]}, "expected 0 < low <= high"),
        ({"shell": {"material": "ZnS", "thickness_nm": 1}}, "add restricted_substances"),
        ({"exemptions_on": date(2026, 1, 1)}, "needs restricted_substances"),
        ({"highest_hazard_clas": 3}, "did you mean highest_hazard_class"),
        ({"sure_at": 0.4}, "greater than 0.5"),
        ({"operating_temperature_K": -5}, "greater than 0"),
    ],
)
def test_limits_that_cannot_be_run_are_refused_in_words(limits, words):
    with pytest.raises(SpecificationError, match=words):
        parse_specification(RED | {"limits": limits})


def test_limits_shape_the_shortlist_and_failures_stay_visible(model):
    limits = {"restricted_substances": True, "highest_fwhm_meV": 220, "diameter_nm": [2.5, 6]}
    result = rank(parse_specification(RED | {"limits": limits}), model)
    assert not result.shortlist["material"].str.contains("Cd|Pb|Hg").any()
    assert result.shortlist["diameter_nm"].between(2.5, 6.0).all()
    assert (result.shortlist["fwhm_meV"] <= 220).all()
    assert result.shortlist["limits"].eq("all limits met").all()
    refused = result.rejected[result.rejected["limit"].eq("restricted_substances")]
    assert "CdSe" in set(refused["material"])
    assert refused["reason"].str.contains("% by mass").all()


def test_a_limit_that_nobody_meets_is_said_with_the_best_that_was_lost(model):
    specification = parse_specification(RED | {"limits": {"highest_fwhm_meV": 1}})
    with pytest.raises(NothingQualifiesError, match=r"highest_fwhm_meV .* loosen a limit"):
        rank(specification, model)


def test_a_stricter_limit_never_lets_more_through():
    table = frame(["CdSe"] * 9, np.arange(2.0, 11.0)).assign(fwhm_meV=np.linspace(300, 60, 9))
    counts = [
        int(judge(table, Limits(highest_fwhm_meV=width)).allowed.sum())
        for width in (50, 100, 200, 400)
    ]
    assert counts == sorted(counts)
    assert (counts[0], counts[-1]) == (0, 9)
