import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from joblib import parallel_config
from sklearn.ensemble import HistGradientBoostingRegressor

from features.errors import NothingQualifiesError, SpecificationError
from screening.calibration import GroupCalibration
from screening.candidates import pair_frame, size_grid
from screening.emission_track import EmissionTrack
from screening.grid_gap import GridGap
from screening.ranking import rank, shortlist_of
from screening.scores import Window, describe, score
from screening.specification import parse_specification
from screening.sweep import Sweep, count_mixtures, enumerate_compositions
from screening.sweep_block import BlockQuestion, search_block, upper_chance
from screening.tree_bounds import tree_bounds

SPACE = {"cations": ["Zn", "Cd"], "anions": ["S", "Se", "Te"], "step_percent": 25}
SWEEP = {
    "target": {"window_nm": [610, 650]},
    "candidates": {"spaces": [SPACE], "diameter_nm": [2.0, 8.0], "step_nm": 0.25},
    "shortlist": {"length": 12},
}
SIZES = tuple(np.round(np.arange(1.5, 10.01, 0.25), 6).tolist())
QUESTION = BlockQuestion(SIZES, (1.92, 2.0), emits=True)


@pytest.fixture(scope="module")
def names():
    return list(enumerate_compositions(parse_specification(SWEEP).candidates))


@pytest.fixture(scope="module")
def plain(model, names):
    """Every pair scored the plain way."""
    pairs = pd.DataFrame(
        {"material": np.repeat(names, len(SIZES)), "diameter_nm": np.tile(SIZES, len(names))}
    )
    scored = score(model, describe(model, pair_frame(pairs), 0.07), Window("emission", 1.92, 2.0))
    return scored.set_index(["material", "diameter_nm"])["chance_in_window"]


def found_series(found):
    index = pd.MultiIndex.from_arrays([found.material, found.diameter_nm])
    return pd.Series(found.chance, index=index)


def test_a_block_without_a_threshold_gives_every_chance_as_the_plain_way_does(model, names, plain):
    found = found_series(search_block(model, names, QUESTION, 0.0))
    assert len(found) == len(plain)
    assert np.abs(found - plain.reindex(found.index)).max() < 1e-10


@pytest.mark.parametrize("least", [0.02, 0.1, 0.25])
def test_nothing_that_reaches_the_threshold_is_dropped(model, names, plain, least):
    found = search_block(model, names, QUESTION, least)
    assert set(found_series(found).index) == set(plain[plain >= least].index)
    assert found.n_solved < found.n_pairs


def test_interpolated_deviations_and_physics_stay_within_their_margins(model, names):
    frame = pair_frame(pd.DataFrame({"material": names, "diameter_nm": 4.0}))
    new = frame[model.record_state(frame["material"]).eq("new")].reset_index(drop=True)
    grid = GridGap(model, "new", np.array(SIZES))
    block = grid.block(new)
    at, size = (part.ravel() for part in np.indices((len(new), len(SIZES))))
    exact = grid.sd_at(block, at, size).reshape(len(new), -1)
    assert np.abs(grid.sd_interpolated(block) / exact - 1.0).max() < 1e-4
    pairs = new.iloc[at].assign(diameter_nm=np.array(SIZES)[size])
    physics, spread = model.physics_of(pairs)
    mean, left = grid.physics(block)
    assert np.abs(mean.ravel() - physics).max() < 1e-5
    assert np.abs(left.ravel() - spread).max() < 1e-5


@given(
    mean=st.floats(1.5, 2.5),
    width=st.floats(0.0, 0.2),
    sd=st.floats(0.01, 0.3),
    stretch=st.floats(1.0, 1.5),
    place=st.floats(0.0, 1.0),
    factor=st.floats(0.0, 1.0),
)
def test_the_upper_chance_is_never_below_a_chance_inside_its_ranges(
    mean, width, sd, stretch, place, factor
):
    calibration = GroupCalibration.from_factors({0.5: 0.9, 0.8: 1.1, 0.9: 1.9}, 30)
    window = (1.9, 2.0)
    bound = upper_chance(
        calibration,
        window,
        (np.array([mean]), np.array([mean + width])),
        (np.array([sd]), np.array([sd * stretch])),
        calibration.density_rise(),
    )
    inside = calibration.chance_between(
        *window, mean + place * width, sd * (1.0 + factor * (stretch - 1.0))
    )
    assert bound[0] >= inside - 1e-12


@given(st.integers(0, 10_000))
def test_tree_bounds_hold_every_prediction_in_the_box(seed):
    rng = np.random.default_rng(seed)
    X = rng.normal(size=(120, 3))
    trees = HistGradientBoostingRegressor(max_iter=20, max_leaf_nodes=6, min_samples_leaf=5)
    trees.fit(X, X[:, 0] * X[:, 1] + rng.normal(size=120))
    low = rng.normal(size=(5, 3))
    high = low + rng.uniform(0.0, 1.0, size=(5, 3))
    lowest, highest = tree_bounds(trees, low, high)
    for at in range(5):
        predicted = trees.predict(rng.uniform(low[at], high[at], size=(50, 3)))
        assert (predicted >= lowest[at] - 1e-9).all()
        assert (predicted <= highest[at] + 1e-9).all()


def exhaustive(model, names):
    """Return the shortlist of the run that names every composition and scores every pair."""
    data = SWEEP | {"candidates": SWEEP["candidates"] | {"spaces": [], "materials": ["CdSe"]}}
    specification = parse_specification(data)
    track = EmissionTrack(specification)
    sizes = size_grid(specification.candidates)
    pairs = pd.DataFrame(
        {"material": np.repeat(names, len(sizes)), "diameter_nm": np.tile(sizes, len(names))}
    )
    scored = track.score(model, pair_frame(pairs))
    return shortlist_of(scored, specification, track)


def test_the_shortlist_of_a_sweep_is_that_of_the_exhaustive_run(model, names):
    result = rank(parse_specification(SWEEP), model)
    whole = exhaustive(model, names)
    assert result.shortlist["material"].tolist() == whole["material"].tolist()
    assert result.shortlist["diameter_nm"].tolist() == whole["diameter_nm"].tolist()
    assert np.allclose(result.shortlist["chance_in_window"], whole["chance_in_window"], atol=1e-12)


def test_one_worker_and_two_find_the_same(model):
    found = []
    for n_jobs in (1, 2):
        with parallel_config(n_jobs=n_jobs):
            found.append(rank(parse_specification(SWEEP), model).shortlist)
    pd.testing.assert_frame_equal(*found, check_exact=True)


def test_finished_blocks_are_taken_up_again_and_others_are_not(model, tmp_path, monkeypatch):
    specification = parse_specification(SWEEP)
    track = EmissionTrack(specification)
    first = Sweep(specification, model, track, tmp_path, "key")
    listed = first.run([])
    files = sorted(tmp_path.iterdir())
    assert files
    calls = []

    def counted(*args):
        calls.append(args)
        return search_block(*args)

    monkeypatch.setattr("screening.sweep.search_block", counted)
    again = Sweep(specification, model, track, tmp_path, "key")
    assert again.run([]) == listed
    assert not calls
    files[0].write_bytes(files[0].read_bytes()[:50])
    assert Sweep(specification, model, track, tmp_path, "key").run([]) == listed
    assert len(calls) == 1
    other = Sweep(specification, model, track, tmp_path, "another key")
    assert other.run([]) == listed
    assert len(calls) > 1


def test_limits_hold_in_a_sweep(model):
    limits = {"limits": {"restricted_substances": True}}
    result = rank(parse_specification(SWEEP | limits), model)
    assert not result.shortlist["material"].str.contains("Cd").any()


def test_counts_add_up(model):
    specification = parse_specification(SWEEP)
    sweep = Sweep(specification, model, EmissionTrack(specification))
    sweep.run([])
    counts = sweep.counts
    assert counts.compositions + sum(counts.refused.values()) == count_mixtures(
        specification.candidates
    )
    assert counts.pairs == counts.compositions * len(size_grid(specification.candidates))
    assert sum(counts.best.values()) == counts.compositions
    assert counts.solved <= counts.with_trees <= counts.pairs


def test_excluded_elements_and_names_do_not_come(model):
    candidates = SWEEP["candidates"] | {
        "exclude_elements": ["Te"],
        "exclude_materials": ["ZnCdSe2"],
    }
    wanted = parse_specification(SWEEP | {"candidates": candidates}).candidates
    refused = {}
    made = list(enumerate_compositions(wanted, refused))
    assert not any("Te" in name for name in made)
    assert "Zn0.5Cd0.5Se" not in made
    assert refused["contains excluded elements"] > 0


def test_a_million_pairs_follow_from_a_short_specification():
    space = {
        "cations": ["Zn", "Cd", "Hg"],
        "anions": ["S", "Se", "Te"],
        "step_percent": 2.5,
        "most_mixed": 3,
    }
    candidates = {"spaces": [space], "diameter_nm": [1.5, 11.5], "step_nm": 0.05}
    wanted = parse_specification(SWEEP | {"candidates": candidates}).candidates
    assert count_mixtures(wanted) * len(size_grid(wanted)) > 1_000_000
    stream = enumerate_compositions(wanted)
    assert len({next(stream) for _ in range(300)}) == 300


def test_a_sweep_in_which_nothing_qualifies_says_how_much_was_met(model):
    nothing = SWEEP | {"shortlist": {"least_chance": 0.999}}
    with pytest.raises(NothingQualifiesError, match="compositions, none likely enough"):
        rank(parse_specification(nothing), model)


@pytest.mark.parametrize(
    ("space", "words"),
    [
        ({"cations": ["Zn"]}, "expected cations and anions, or sites"),
        ({**SPACE, "sites": [{"elements": ["Zn"], "atoms": 1}]}, "exactly one of the two"),
        ({**SPACE, "ranges": {"Zn": [0.8, 0.2]}}, "expected 0 <= low <= high <= 1"),
        ({**SPACE, "ranges": {"In": [0.1, 0.2]}}, "range of In"),
        ({**SPACE, "step_percent": 30}, "a divisor of 100"),
        ({**SPACE, "cations": ["Qq"]}, "unknown element"),
        ({**SPACE, "steps": 5}, "unknown key 'steps'"),
    ],
)
def test_a_space_that_cannot_be_searched_is_refused(space, words):
    candidates = SWEEP["candidates"] | {"spaces": [space]}
    with pytest.raises(SpecificationError, match=words):
        parse_specification(SWEEP | {"candidates": candidates})
