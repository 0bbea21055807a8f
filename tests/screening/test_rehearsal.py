import numpy as np
import pytest

from screening.rehearsal import POLICIES, hidden_curve, rehearse, summarise_rehearsal


@pytest.fixture(scope="module")
def rehearsal(rows):
    return rehearse(rows, ["InAs"])


def test_the_hidden_curve_falls_and_stays_inside_the_records(rows):
    own = rows[rows["material"].eq("CdSe")]
    diameter, gap = hidden_curve(own)
    assert diameter.min() >= own["diameter_nm"].min() - 1e-9
    assert diameter.max() <= own["diameter_nm"].max() + 1e-9
    assert (np.diff(gap) <= 1e-12).all()


def test_every_policy_is_played_on_every_window(rehearsal):
    campaigns, _ = rehearsal
    counts = campaigns.groupby(["seed", "window_eV"])["policy"].agg(list)
    assert all(sorted(found) == sorted(POLICIES) for found in counts)


def test_random_choice_takes_what_combinatorics_expects(rehearsal):
    campaigns, _ = rehearsal
    random = campaigns[campaigns["policy"].eq("random")]
    n_hits = random["share_of_hits"] * random["n_candidates"]
    # expected place of the first of K marked in a random order of N: (N + 1) / (K + 1)
    expected = (random["n_candidates"] + 1) / (n_hits + 1)
    assert np.allclose(random["samples_to_first_hit"], expected)


def test_three_samples_bring_the_error_down(rehearsal):
    _, learned = rehearsal
    error = learned.set_index("n_samples")["mean_absolute_error_eV"]
    assert error[3] < error[0]


def test_the_summary_counts_one_row_a_policy(rehearsal):
    campaigns, _ = rehearsal
    figures = summarise_rehearsal(campaigns)
    assert figures["policy"].tolist() == [p for p in POLICIES if p in set(campaigns["policy"])]
    assert (figures["low"] <= figures["median_samples"]).all()
    assert (figures["median_samples"] <= figures["high"]).all()
