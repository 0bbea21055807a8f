"""The next samples: a batch that is likely to hit, or teaches most, with the reason of each.

Picks are made one after the other. After each the beliefs are conditioned on its having been
measured: the means stay (nobody knows the result yet), the variances of all related candidates
fall. Errors of one material go together, so a batch spreads over materials where that helps.
"""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.special import ndtri

from features.errors import NothingQualifiesError, SpecificationError, explain
from features.formula import parse_formula
from screening.acquisition import (
    condition,
    coverage_gain,
    expected_approach_eV,
    expected_calm_eV2,
    straddle_eV,
)
from screening.covariance import FloatArray
from screening.dots import SizeGapModel

if TYPE_CHECKING:
    from screening.plan_rules import Plan
    from screening.ranking import RankResult

__all__ = ["PLAN_COLUMNS", "plan_samples"]

PLAN_COLUMNS = (
    "sample",
    "material",
    "structure",
    "shape",
    "diameter_nm",
    "emission_eV",
    "emission_nm",
    "optical_gap_eV",
    "chance_in_window",
    "chance_of_one",
    "cost",
    "is_random",
    "record_state",
    "reason",
    "cautions",
)
"""Columns of a plan, in order."""

_N_DRAWS = 4000
_MOST_CANDIDATES = 400
_MOST_SIZES = 25
_MEASUREMENT_SD_EV = 0.02
_FAR_EV = 0.5
"""Distance from the window beyond which, with no result yet, nothing is worth less."""


@dataclass
class _Belief:
    """What is held of the candidates while a batch grows."""

    mean: FloatArray
    covariance: FloatArray
    noise: FloatArray
    window: tuple[float, float]
    hits: NDArray[np.bool_]
    landed: NDArray[np.bool_]
    best_eV: float
    watched: FloatArray

    @property
    def sd(self) -> FloatArray:
        """Standard deviation of the next measurement of each candidate."""
        return np.asarray(np.sqrt(np.maximum(np.diag(self.covariance), 0.0) + self.noise))

    def worth(self, policy: str) -> FloatArray:
        """Return what measuring each candidate is worth under a policy."""
        if policy == "hit":
            return coverage_gain(self.hits, self.landed)
        if policy == "approach":
            return expected_approach_eV(self.mean, self.sd, self.window, self.best_eV)
        if policy == "edge":
            return np.maximum(straddle_eV(self.mean, self.sd, self.window), 0.0)
        return expected_calm_eV2(self.covariance, self.noise, self.watched)

    def take(self, at: int) -> None:
        """Condition on a candidate's having been measured."""
        self.covariance = condition(self.covariance, at, float(self.noise[at]))
        self.landed = self.landed | self.hits[:, at]


def plan_samples(
    result: "RankResult", results: pd.DataFrame | None = None, samples: int | None = None
) -> pd.DataFrame:
    """Choose the next samples of a ranked specification.

    Parameters
    ----------
    result : RankResult
        Of an optical target.
    results : pandas.DataFrame or None, default None
        Rows measured so far, as from ``screening.measurements.measured_rows``; sizes made already
        are not proposed again.
    samples : int or None, default None
        Number of samples; None for the specification's.

    Returns
    -------
    pandas.DataFrame
        Columns `PLAN_COLUMNS`, in the order in which to make them; chance_of_one is the chance
        that at least one sample up to here lands, errors of one material going together.

    Raises
    ------
    SpecificationError
        If the target is not optical, or a cost names a material that is no formula.
    NothingQualifiesError
        If no candidate is left to choose from.
    """
    specification = result.specification
    if specification.target.quantity not in {"emission", "optical_gap"}:
        raise SpecificationError(
            explain("no plan for this target", expected="emission or optical_gap")
        )
    rules = specification.plan
    wanted = rules.samples if samples is None else samples
    frame = _candidates(result, rules, results)
    belief = _belief(result, frame, results)
    costs = _costs(frame, rules)
    rng = np.random.default_rng(specification.seed)
    n_random = round(wanted * rules.random_share)
    free = np.ones(len(frame), dtype=bool)
    picks: list[dict[str, object]] = []
    for number in range(wanted):
        is_random = number >= wanted - n_random
        at, reason = (
            _random_pick(belief, free, rng)
            if is_random
            else _best_pick(belief, free, costs, rules.policy)
        )
        if at < 0:
            break
        belief.take(at)
        free &= ~_too_close(frame, at, rules)
        picks.append(
            {
                "at": at,
                "is_random": is_random,
                "reason": reason,
                "chance_of_one": float(belief.landed.mean()),
                "cost": float(costs[at]),
            }
        )
        free &= ~_used_up(frame, picks, rules)
    return _table(frame, picks)


def _candidates(result: "RankResult", rules: "Plan", results: pd.DataFrame | None) -> pd.DataFrame:
    """Return the likeliest candidates that the limits allow and nobody has made yet."""
    scored = result.scored[result.scored["is_allowed"]]
    if rules.sizes_nm:
        grid = np.asarray(rules.sizes_nm)
        gap = np.abs(scored["diameter_nm"].to_numpy()[:, None] - grid).min(axis=1)
        scored = scored[gap < 1e-6]
    if results is not None:
        scored = scored[~_made(scored, results, rules.spacing_nm)]
    likely = scored[scored["chance_in_window"] > 1e-4]
    if likely.empty:
        raise NothingQualifiesError(
            explain(
                "no candidate is left to plan with",
                where="plan",
                do="widen the window, the sizes that can be made, or the limits",
            )
        )
    order = ["chance_in_window", "material", "diameter_nm"]
    best = likely.sort_values(order, ascending=[False, True, True], kind="stable")
    few = best.groupby("material", sort=False).head(_MOST_SIZES)
    return few.head(_MOST_CANDIDATES).reset_index(drop=True)


def _made(scored: pd.DataFrame, results: pd.DataFrame, spacing_nm: float) -> NDArray[np.bool_]:
    made = np.zeros(len(scored), dtype=bool)
    for material, diameter in zip(results["material"], results["diameter_nm"], strict=True):
        near = (scored["diameter_nm"] - diameter).abs() < max(spacing_nm / 2.0, 1e-6)
        made |= (scored["material"].eq(material) & near).to_numpy()
    return made


def _belief(result: "RankResult", frame: pd.DataFrame, results: pd.DataFrame | None) -> _Belief:
    emits = result.specification.target.quantity == "emission"
    window = result.specification.target.energies_eV
    mean = frame["emission_eV" if emits else "optical_gap_eV"].to_numpy(dtype=np.float64)
    stokes = frame["stokes_sd_eV"].to_numpy() if emits else np.zeros(len(frame))
    covariance, noise = _covariance(result.model, frame, stokes)
    rng = np.random.default_rng(result.specification.seed)
    draws = mean + _draw(covariance + np.diag(noise), rng)
    best = _FAR_EV if results is None else _best_so_far(result, results, window)
    return _Belief(
        mean=mean,
        covariance=covariance,
        noise=noise,
        window=window,
        hits=(draws >= window[0]) & (draws <= window[1]),
        landed=np.zeros(_N_DRAWS, dtype=bool),
        best_eV=best,
        watched=frame["chance_in_window"].to_numpy(dtype=np.float64),
    )


def _best_so_far(result: "RankResult", results: pd.DataFrame, window: tuple[float, float]) -> float:
    """Return how far the best result lies from the window, eV."""
    emits = result.specification.target.quantity == "emission"
    energy = results["optical_gap_eV"].to_numpy(dtype=np.float64)
    if emits:
        from features.emission import stokes_shifts  # noqa: PLC0415 - one small table

        shifts = stokes_shifts(results["material"].tolist(), results["family"].tolist())
        energy = energy - shifts["stokes_shift_eV"].to_numpy()
    away = np.maximum(np.maximum(window[0] - energy, energy - window[1]), 0.0)
    return float(away.min())


def _covariance(
    model: SizeGapModel, frame: pd.DataFrame, stokes_sd_eV: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return the calibrated covariance of candidates and the variance of their measurement.

    What the Gaussian process does not hold (bulk constants, Stokes shift, disagreement of the two
    regressors) is shared by all sizes of a material.
    """
    joint = model.joint_covariance(frame)
    noise = model.measurement_noise_eV(frame) ** 2
    total = frame["model_sd_eV"].to_numpy() ** 2 + stokes_sd_eV**2
    rest = np.sqrt(np.maximum(total - noise - np.diag(joint), 0.0))
    codes = pd.factorize(frame["material"])[0]
    joint = joint + np.outer(rest, rest) * (codes[:, None] == codes)
    factor = np.empty(len(frame))
    for name, state in model.states_.items():
        level = max(state.calibration.factors_)
        rows = frame["record_state"].to_numpy() == name
        factor[rows] = state.calibration.factor(level) / ndtri(0.5 + level / 2.0)
    return joint * np.outer(factor, factor), noise * factor**2 + _MEASUREMENT_SD_EV**2


def _draw(covariance: FloatArray, rng: np.random.Generator) -> FloatArray:
    """Return joint draws around zero; eigenvalues below zero are rounding."""
    values, vectors = np.linalg.eigh(covariance)
    root = vectors * np.sqrt(np.maximum(values, 0.0))
    return np.asarray(rng.standard_normal((_N_DRAWS, len(values))) @ root.T)


def _costs(frame: pd.DataFrame, rules: "Plan") -> FloatArray:
    named = {parse_formula(text).formula: cost for text, cost in rules.costs.items()}
    formulas = {name: parse_formula(name).formula for name in frame["material"].unique()}
    return frame["material"].map(lambda name: named.get(formulas[name], 1.0)).to_numpy(dtype=float)


def _best_pick(
    belief: _Belief, free: NDArray[np.bool_], costs: FloatArray, policy: str
) -> tuple[int, str]:
    worth = belief.worth(policy)
    value = np.where(free, worth / costs, -1.0)
    at = int(np.argmax(value))
    if value[at] > 0.0:
        return at, _reason(belief, at, policy, float(worth[at]))
    if not free.any():
        return -1, ""
    at = int(np.argmax(np.where(free, belief.hits.mean(axis=0) / costs, -1.0)))
    return at, (
        f"lands with a chance of {belief.hits[:, at].mean():.0%}; by itself it adds nothing that "
        "the samples before do not promise already"
    )


def _reason(belief: _Belief, at: int, policy: str, worth: float) -> str:
    if policy == "hit":
        before = float(belief.landed.mean())
        return (
            f"lands with a chance of {belief.hits[:, at].mean():.0%}; the chance that at least one "
            f"sample lands rises from {before:.0%} to {before + worth:.0%}"
        )
    if policy == "approach":
        return (
            f"expected to come {1000.0 * worth:.0f} meV nearer to the window than the best so far "
            f"({1000.0 * belief.best_eV:.0f} meV away)"
        )
    if policy == "edge":
        return f"its 95 % belief reaches {1000.0 * worth:.0f} meV over an edge of the window"
    total = float(belief.watched @ np.diag(belief.covariance))
    return f"lowers the summed variance of the likeliest candidates by {worth / total:.0%}"


def _random_pick(
    belief: _Belief, free: NDArray[np.bool_], rng: np.random.Generator
) -> tuple[int, str]:
    inside = (belief.mean >= belief.window[0]) & (belief.mean <= belief.window[1])
    pool = np.flatnonzero(free & inside)
    if not len(pool):
        pool = np.flatnonzero(free)
    if not len(pool):
        return -1, ""
    at = int(rng.choice(pool))
    return at, (
        f"drawn at random among {len(pool)} candidates predicted inside the window: an unbiased "
        "check of the chances"
    )


def _too_close(frame: pd.DataFrame, at: int, rules: "Plan") -> NDArray[np.bool_]:
    same = frame["material"].eq(frame["material"].iloc[at])
    near = (frame["diameter_nm"] - frame["diameter_nm"].iloc[at]).abs() < rules.spacing_nm - 1e-9
    close: NDArray[np.bool_] = np.asarray(same & near) | (np.arange(len(frame)) == at)
    return close


def _used_up(
    frame: pd.DataFrame, picks: list[dict[str, object]], rules: "Plan"
) -> NDArray[np.bool_]:
    chosen = frame["material"].iloc[[int(str(pick["at"])) for pick in picks]].value_counts()
    full = chosen[chosen >= rules.per_material].index
    return np.asarray(frame["material"].isin(full))


def _table(frame: pd.DataFrame, picks: list[dict[str, object]]) -> pd.DataFrame:
    from screening.ranking import caution_column  # noqa: PLC0415 - it imports the whole ranking

    extra = pd.DataFrame(picks).drop(columns="at")
    rows = frame.iloc[[int(str(pick["at"])) for pick in picks]].reset_index(drop=True)
    table = rows.join(extra)
    table.insert(0, "sample", np.arange(1, len(table) + 1))
    table["cautions"] = caution_column(table["material"])
    return table[list(PLAN_COLUMNS)]
