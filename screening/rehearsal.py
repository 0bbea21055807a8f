"""Discovery replayed: a material is hidden, and every policy looks for a window in it again.

What the policies know is learned from the other materials alone. The hidden material's own records,
made monotonic in the size and interpolated between their smallest and largest size, stand in for
the laboratory; nothing beyond its records is asked. Energies in eV, lengths in nm.
"""

from collections.abc import Callable, Sequence

import numpy as np
import pandas as pd
from joblib import Parallel, delayed
from sklearn.isotonic import IsotonicRegression

from features.size_gap import size_gap_rows
from screening.acquisition import BoolArray, expected_approach_eV, expected_calm_eV2, straddle_eV
from screening.covariance import FloatArray
from screening.dot_baselines import BASELINES
from screening.dots import SizeGapModel

__all__ = ["LEARNING", "POLICIES", "STATIC", "hidden_curve", "rehearse", "summarise_rehearsal"]

STATIC = {
    "nearest known material's curve": "nearest material's curve",
    "best physics formula": "finite barrier",
}
"""Policies that follow a prediction outwards, and the baseline that predicts."""

LEARNING = ("hit", "approach", "edge", "teach")
"""Policies of the program: the model is conditioned on every result."""

POLICIES = (
    "random",
    *STATIC,
    *(f"{name}, shifted by the results" for name in STATIC),
    *LEARNING,
)
"""All policies of a rehearsal."""

_STEP_nm = 0.1
_HALF_WINDOW_EV = 0.03
_PLACES = (1 / 6, 1 / 2, 5 / 6)
_MEASUREMENT_SD_EV = 0.01
_BUDGET = 6
_FEWEST_SIZES = 3
_COMMONEST = 0.5

Chooser = Callable[[list[int], list[float]], FloatArray]


def hidden_curve(own: pd.DataFrame) -> tuple[FloatArray, FloatArray]:
    """Return sizes that can be made of a hidden material and its gap there.

    Parameters
    ----------
    own : pandas.DataFrame
        The material's training rows.

    Returns
    -------
    diameter_nm, gap_eV : ndarray
        Steps of 0.1 nm from the smallest to the largest record; the gap falls with the size
        (isotonic regression of the records, interpolated in the logarithm of the size).
    """
    low, high = own["diameter_nm"].min(), own["diameter_nm"].max()
    grid = np.round(np.arange(np.ceil(low / _STEP_nm), high / _STEP_nm + 1e-9) * _STEP_nm, 6)
    fit = IsotonicRegression(increasing=False, out_of_bounds="clip")
    fit.fit(np.log(own["diameter_nm"]), own["optical_gap_eV"], sample_weight=own["vote"])
    return grid, np.asarray(fit.predict(np.log(grid)), dtype=np.float64)


def rehearse(
    rows: pd.DataFrame,
    materials: Sequence[str] | None = None,
    n_jobs: int = 1,
    seeds: Sequence[int] = (0, 1),
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Replay discovery with each material hidden in turn.

    Parameters
    ----------
    rows : pandas.DataFrame
        As from ``features.size_gap.training_rows``.
    materials : sequence of str or None, default None
        Materials to hide; None for all with three recorded sizes or more.
    n_jobs : int, default 1
        Workers; the result does not depend on it.
    seeds : sequence of int, default (0, 1)
        Of the noise of what is measured, each played in full.

    Returns
    -------
    campaigns : pandas.DataFrame
        One row a material, seed, window and policy: samples_to_first_hit, hits_in_budget (of six
        samples), regret_eV (distance of the best of six from the window), n_candidates,
        share_of_hits.
    learned : pandas.DataFrame
        One row a material: error and 90 % coverage over the other sizes after three samples.
    """
    counts = rows.groupby("material")["diameter_nm"].nunique()
    chosen = sorted(counts[counts >= _FEWEST_SIZES].index) if materials is None else list(materials)
    parts = Parallel(n_jobs=n_jobs)(delayed(_hide)(rows, material, seeds) for material in chosen)
    campaigns = pd.concat([part[0] for part in parts], ignore_index=True)
    return campaigns, pd.concat([part[1] for part in parts], ignore_index=True)


class _Hidden:
    """One hidden material: what can be made, what would be measured, what is believed."""

    def __init__(self, rows: pd.DataFrame, material: str) -> None:
        own = rows[rows["material"].eq(material)]
        self.others = rows[rows["material"].ne(material)]
        self.material = material
        self.diameter, self.gap = hidden_curve(own)
        first = own.iloc[0]
        self.measure(0)
        constant = {name: first[name] for name in own.columns}
        self.frame = pd.DataFrame([constant] * len(self.diameter)).assign(
            diameter_nm=self.diameter, shape="sphere"
        )
        self.model = SizeGapModel(0).fit(self.others).calibrate()

    def measure(self, seed: int) -> None:
        """Draw what would be measured at every size."""
        # a material's noise must not follow another's
        rng = np.random.default_rng([seed, *self.material.encode()])
        self.seed = seed
        self.measured = self.gap + rng.normal(0.0, _MEASUREMENT_SD_EV, len(self.gap))

    def results(self, made: Sequence[int]) -> pd.DataFrame:
        """Return made samples as training rows."""
        chosen = self.frame.iloc[list(made)].reset_index(drop=True)
        records = chosen.assign(
            record=[f"hidden {at}" for at in made],
            energy_eV=self.measured[list(made)],
            energy_kind="absorption",
            energy_sd_eV=_MEASUREMENT_SD_EV,
            diameter_uncertainty_nm=0.01 * chosen["diameter_nm"],
            curve=None,
            source="hidden",
        )
        bulk = chosen[_BULK].copy()
        return size_gap_rows(records.drop(columns=_DERIVED), bulk)

    def believed(self, made: Sequence[int]) -> SizeGapModel:
        """Return the model with the made samples."""
        return self.model.conditioned(self.results(made)) if made else self.model


_DERIVED = [
    "family",
    "gap_eV",
    "gap_sd_eV",
    "electron_mass_m0",
    "hole_mass_m0",
    "dielectric",
    "lattice_a_nm",
    "filled",
    "optical_gap_eV",
    "noise_eV",
    "vote",
]
_BULK = ["material", "structure", "source", *_DERIVED[:8]]


def _hide(
    rows: pd.DataFrame, material: str, seeds: Sequence[int]
) -> tuple[pd.DataFrame, pd.DataFrame]:
    hidden = _Hidden(rows, material)
    campaigns = [
        figures
        for seed in seeds
        for place in _PLACES
        for figures in _campaigns(hidden, seed, place)
    ]
    columns = ["material", "seed", "window_eV", "policy", "samples_to_first_hit"]
    columns += ["hits_in_budget", "regret_eV", "n_candidates", "share_of_hits"]
    hidden.measure(seeds[0])
    return pd.DataFrame(campaigns, columns=columns), _after_three(hidden)


def _campaigns(hidden: _Hidden, seed: int, place: float) -> list[dict[str, object]]:
    """Play every policy on one window; none where hits are too common to look for."""
    hidden.measure(seed)
    centre = float(hidden.gap[int(place * (len(hidden.gap) - 1))])
    inside = np.abs(hidden.gap - centre) <= _HALF_WINDOW_EV
    if inside.mean() > _COMMONEST:
        return []
    return [
        _figures(hidden, policy, centre, inside, _campaign(hidden, policy, centre, inside))
        for policy in POLICIES
    ]


def _figures(
    hidden: _Hidden, policy: str, centre: float, inside: BoolArray, order: list[int]
) -> dict[str, object]:
    hits = inside[order]
    away = np.maximum(np.abs(hidden.gap[order[:_BUDGET]] - centre) - _HALF_WINDOW_EV, 0.0)
    first = int(np.argmax(hits)) + 1
    if policy == "random":
        # exact expectation over all orders: (N + 1) / (K + 1)
        first_expected = (len(inside) + 1) / (inside.sum() + 1)
    return {
        "material": hidden.material,
        "seed": hidden.seed,
        "window_eV": round(centre, 4),
        "policy": policy,
        "samples_to_first_hit": first_expected if policy == "random" else first,
        "hits_in_budget": int(hits[:_BUDGET].sum()),
        "regret_eV": float(away.min()),
        "n_candidates": len(inside),
        "share_of_hits": float(inside.mean()),
    }


def _campaign(hidden: _Hidden, policy: str, centre: float, inside: BoolArray) -> list[int]:
    """Return the candidates in the order in which a policy makes them."""
    if policy == "random":
        return list(np.random.default_rng(hidden.seed).permutation(len(inside)))
    choose = _chooser(hidden, policy, centre)
    made: list[int] = []
    while len(made) < len(inside):
        worth = choose(made)
        worth[made] = -np.inf
        made.append(int(np.argmax(worth)))
        if len(made) >= _BUDGET and inside[made].any():
            break
    return made


def _chooser(hidden: _Hidden, policy: str, centre: float) -> Callable[[list[int]], FloatArray]:
    name = policy.removesuffix(", shifted by the results")
    if name in STATIC:
        predicted = BASELINES[STATIC[name]](hidden.others, hidden.frame)
        shifts = policy != name

        def follow(made: list[int]) -> FloatArray:
            shift = float((hidden.measured - predicted)[made].mean()) if made and shifts else 0.0
            return -np.abs(predicted + shift - centre)

        return follow
    window = (centre - _HALF_WINDOW_EV, centre + _HALF_WINDOW_EV)
    return lambda made: _worth(hidden, policy, window, made)


def _worth(
    hidden: _Hidden, policy: str, window: tuple[float, float], made: list[int]
) -> FloatArray:
    """Return what each candidate is worth to a policy of the program."""
    model = hidden.believed(made)
    held = model.predict(hidden.frame)
    mean, sd = held["optical_gap_eV"].to_numpy(), held["model_sd_eV"].to_numpy()
    if policy == "hit":
        calibration = model.states_[held["record_state"].iloc[0]].calibration
        chance = calibration.chance_between(*window, mean, sd)
        # far from the window all chances are nought: then come nearer
        return chance - 1e-9 * np.abs(mean - sum(window) / 2.0)
    if policy == "approach":
        tried = hidden.measured[made]
        away = np.maximum(np.abs(tried - sum(window) / 2.0) - _HALF_WINDOW_EV, 1e-3)
        return expected_approach_eV(mean, sd, window, float(away.min()) if made else 0.5)
    if policy == "edge":
        return straddle_eV(mean, sd, window)
    noise = np.full(len(mean), _MEASUREMENT_SD_EV**2)
    return expected_calm_eV2(model.joint_covariance(hidden.frame), noise, np.ones(len(mean)))


def _after_three(hidden: _Hidden) -> pd.DataFrame:
    """Judge the other sizes after three samples spread over the range."""
    last = len(hidden.gap) - 1
    made = sorted({round(place * last) for place in _PLACES})
    rest = np.setdiff1d(np.arange(last + 1), made)
    rows = []
    for count, chosen in ((0, []), (len(made), made)):
        model = hidden.believed(chosen)
        held = model.predict(hidden.frame)
        low, high = model.interval(held, 0.9)
        error = np.abs(held["optical_gap_eV"].to_numpy() - hidden.gap)
        covered = (hidden.gap >= low) & (hidden.gap <= high)
        rows.append(
            {
                "material": hidden.material,
                "n_samples": count,
                "mean_absolute_error_eV": float(error[rest].mean()),
                "coverage_90": float(covered[rest].mean()),
                "mean_width_90_eV": float((high - low)[rest].mean()),
                "n_sizes": len(rest),
            }
        )
    return pd.DataFrame(rows)


def summarise_rehearsal(campaigns: pd.DataFrame, seed: int = 0) -> pd.DataFrame:
    """Return figures by policy, with bootstrap bands over materials.

    Parameters
    ----------
    campaigns : pandas.DataFrame
        As from `rehearse`.
    seed : int, default 0

    Returns
    -------
    pandas.DataFrame
        One row a policy: median_samples with its 90 % band, hits_in_budget, regret_eV (means, one
        vote a material) and worse_than_random, the share of windows that took more samples than
        random choice is expected to.
    """
    wide = campaigns.pivot_table(
        index=["material", "seed", "window_eV"], columns="policy", values="samples_to_first_hit"
    )
    names = sorted(campaigns["material"].unique())
    by_material = {name: wide.xs(name, level="material") for name in names}
    rng = np.random.default_rng(seed)
    draws = [rng.choice(names, len(names)) for _ in range(500)]
    rows = []
    for policy in [p for p in POLICIES if p in wide.columns]:
        part = campaigns[campaigns["policy"].eq(policy)]
        medians = [np.median(np.concatenate([by_material[n][policy] for n in d])) for d in draws]
        low, high = np.quantile(medians, [0.05, 0.95])
        means = part.groupby("material")[["hits_in_budget", "regret_eV"]].mean().mean()
        rows.append(
            {
                "policy": policy,
                "median_samples": float(wide[policy].median()),
                "low": float(low),
                "high": float(high),
                "mean_samples": float(wide[policy].mean()),
                "hits_in_budget": float(means["hits_in_budget"]),
                "regret_eV": float(means["regret_eV"]),
                "worse_than_random": float((wide[policy] > wide["random"]).mean()),
                "n_windows": len(wide),
                "n_materials": len(names),
            }
        )
    return pd.DataFrame(rows)
