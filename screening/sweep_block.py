"""One block of a sweep: which pairs of its compositions and sizes can be among the best.

Cheap bounds first: the Gaussian process' mean is exact, its standard deviation and the physics
are interpolated in size within a stated margin, the trees are bounded over a box. What cannot
reach the chance that the running list asks for is dropped; the trees, then the standard deviation
are evaluated exactly for what is left. Nothing that could be listed is ever dropped.
"""

from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from features.confinement_features import physics_columns
from features.emission import stokes_shifts
from screening.calibration import GroupCalibration
from screening.candidates import pair_frame
from screening.covariance import FloatArray
from screening.grid_gap import GridBlock, GridGap, IntArray
from screening.tree_bounds import tree_bounds

if TYPE_CHECKING:
    from screening.dots import SizeGapModel

__all__ = ["BlockQuestion", "Found", "search_block", "upper_chance"]

_MARGIN_EV = 1e-4
"""Margin of the interpolated physics; tests show errors a hundred times smaller."""
_MARGIN_SD = 1e-3
"""Relative margin of the interpolated standard deviations; likewise."""
_MARGIN_FEATURE = 1e-4
_ALIKE = 32
"""Compositions over which the trees are bounded together."""


@dataclass(frozen=True)
class BlockQuestion:
    """What every block of a sweep is asked.

    Parameters
    ----------
    diameter_nm : tuple of float
        Rising sizes.
    window_eV : tuple of float
    emits : bool
        Whether the window is about emission; the optical gap otherwise.
    """

    diameter_nm: tuple[float, ...]
    window_eV: tuple[float, float]
    emits: bool


@dataclass(frozen=True)
class Found:
    """Pairs of a block that reach the chance asked, and what became of the others.

    Parameters
    ----------
    material : ndarray of str
    diameter_nm, chance : ndarray of shape (n_found,)
        Exact chances.
    n_pairs, n_trees, n_solved : int
        Pairs met, pairs that needed the trees, pairs that needed a solve.
    best : ndarray of shape (n_compositions,)
        Highest chance of each composition: exact where found, else its upper bound.
    """

    material: NDArray[np.object_]
    diameter_nm: FloatArray
    chance: FloatArray
    n_pairs: int
    n_trees: int
    n_solved: int
    best: FloatArray


def upper_chance(
    calibration: GroupCalibration,
    window_eV: tuple[float, float],
    centre: tuple[FloatArray, FloatArray],
    sd: tuple[FloatArray, FloatArray],
    ratio: float,
) -> FloatArray:
    """Return an upper bound of the chance in a window for centres and deviations in ranges.

    Parameters
    ----------
    calibration : GroupCalibration
    window_eV : tuple of float
    centre, sd : tuple of ndarray
        Lowest and highest values, eV.
    ratio : float
        As from ``GroupCalibration.density_rise``: the bound takes the centre nearest to the middle,
        which is best for a density that falls, times this ratio for one that does not quite.

    Returns
    -------
    ndarray
    """
    low, high = window_eV
    nearest = np.clip(0.5 * (low + high), centre[0], centre[1])
    above, below = high - nearest, low - nearest
    upper = above / np.where(above > 0.0, sd[0], sd[1])
    lower = below / np.where(below > 0.0, sd[1], sd[0])
    gain = calibration.cdf(upper, 0.0, 1.0) - calibration.cdf(lower, 0.0, 1.0)
    return np.minimum(ratio * np.maximum(gain, 0.0), 1.0)


@lru_cache(maxsize=4)
def _grid(model: "SizeGapModel", state: str, diameter_nm: tuple[float, ...]) -> GridGap:
    return GridGap(model, state, np.asarray(diameter_nm, dtype=np.float64))


def search_block(
    model: "SizeGapModel", materials: list[str], question: BlockQuestion, least: float
) -> Found:
    """Return every pair of a block whose chance is at least a given one.

    Parameters
    ----------
    model : SizeGapModel
        Fitted and calibrated.
    materials : list of str
        Formulas.
    question : BlockQuestion
    least : float
        Chance from which a pair is wanted.

    Returns
    -------
    Found
    """
    frame = pair_frame(pd.DataFrame({"material": materials, "diameter_nm": 4.0}))
    states = model.record_state(frame["material"])
    parts = [
        _search_state(model, str(state), part.reset_index(drop=True), question, least)
        for state, part in frame.groupby(states, sort=True)
    ]
    return Found(
        material=np.concatenate([part.material for part in parts]),
        diameter_nm=np.concatenate([part.diameter_nm for part in parts]),
        chance=np.concatenate([part.chance for part in parts]),
        n_pairs=sum(part.n_pairs for part in parts),
        n_trees=sum(part.n_trees for part in parts),
        n_solved=sum(part.n_solved for part in parts),
        best=np.concatenate([part.best for part in parts]),
    )


def _search_state(
    model: "SizeGapModel", state: str, frame: pd.DataFrame, question: BlockQuestion, least: float
) -> Found:
    grid = _grid(model, state, question.diameter_nm)
    calibration = model.states_[state].calibration
    ratio, block = calibration.density_rise(), grid.block(frame)
    shift, shift_sd = _emission_shift(frame, emits=question.emits)
    physics, spread = grid.physics(block)
    gaussian, sd = grid.gaussian_mean(block), grid.sd_interpolated(block)
    own = spread**2 + shift_sd[:, None] ** 2
    low, high = _tree_range(grid, block, physics)
    bound = _bound(
        calibration, question, grid, ratio, physics - shift[:, None], gaussian, (low, high), sd, own
    )
    at, size = (found.astype(np.int64) for found in np.nonzero(bound >= least))
    trees = _exact_trees(grid, frame, at, size)
    bound[at, size] = _bound(
        calibration,
        question,
        grid,
        ratio,
        physics[at, size] - shift[at],
        gaussian[at, size],
        (trees, trees),
        sd[at, size],
        own[at, size],
        grid.scale[size],
    )
    kept = bound[at, size] >= least
    n_trees, at, size, trees = len(at), at[kept], size[kept], trees[kept]
    chance = _exact_chance(model, grid, block, question, at, size, trees, shift, shift_sd)
    bound[at, size] = chance
    good = chance >= least
    return Found(
        material=frame["material"].to_numpy(dtype=object)[at[good]],
        diameter_nm=grid.diameter_nm[size[good]],
        chance=chance[good],
        n_pairs=bound.size,
        n_trees=n_trees,
        n_solved=len(at),
        best=bound.max(axis=1),
    )


def _emission_shift(frame: pd.DataFrame, *, emits: bool) -> tuple[FloatArray, FloatArray]:
    if not emits:
        return np.zeros(len(frame)), np.zeros(len(frame))
    shifts = stokes_shifts(frame["material"].tolist(), frame["family"].tolist())
    return (
        shifts["stokes_shift_eV"].to_numpy(dtype=np.float64),
        shifts["stokes_sd_eV"].to_numpy(dtype=np.float64),
    )


def _bound(
    calibration: GroupCalibration,
    question: BlockQuestion,
    grid: GridGap,
    ratio: float,
    physics: FloatArray,
    gaussian: FloatArray,
    trees: tuple[FloatArray, FloatArray],
    sd: FloatArray,
    own: FloatArray,
    scale: FloatArray | None = None,
) -> FloatArray:
    """Return upper bounds of the chance from ranges of the trees."""
    unit = grid.scale if scale is None else scale
    weight = grid.weight
    low, high = (physics + unit * (weight * gaussian + (1.0 - weight) * end) for end in trees)
    nearest = np.clip(gaussian, trees[0], trees[1])
    farthest = np.where(
        np.abs(gaussian - trees[0]) > np.abs(gaussian - trees[1]), trees[0], trees[1]
    )
    deviations = []
    for tree, margin in ((nearest, 1.0 - _MARGIN_SD), (farthest, 1.0 + _MARGIN_SD)):
        variance = sd**2 + weight * (1.0 - weight) * (gaussian - tree) ** 2 + grid.noise**2
        deviations.append(margin * np.sqrt(variance * unit**2 + own))
    return upper_chance(
        calibration,
        question.window_eV,
        (low - _MARGIN_EV, high + _MARGIN_EV),
        (deviations[0], deviations[1]),
        ratio,
    )


def _tree_range(
    grid: GridGap, block: GridBlock, physics: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return bounds of the trees at every size, over groups of similar compositions."""
    if grid.weight >= 1.0:
        return np.zeros(len(grid.diameter_nm)), np.zeros(len(grid.diameter_nm))
    order = np.lexsort((block.frame["electron_mass_m0"], block.frame["gap_eV"]))
    starts = np.arange(0, len(order), _ALIKE)
    features = [part[order] for part in _features(block.frame, grid.diameter_nm, physics)]
    low = np.stack([np.minimum.reduceat(part, starts) for part in features], axis=-1)
    high = np.stack([np.maximum.reduceat(part, starts) for part in features], axis=-1)
    shape = low.shape[:2]
    ends = tree_bounds(
        grid.regressor.trees_,
        low.reshape(-1, low.shape[-1]) - _MARGIN_FEATURE,
        high.reshape(-1, high.shape[-1]) + _MARGIN_FEATURE,
    )
    group = np.empty(len(order), dtype=np.int64)
    group[order] = np.arange(len(order)) // _ALIKE
    lowest, highest = (end.reshape(shape)[group] for end in ends)
    return lowest, highest


def _features(
    frame: pd.DataFrame, diameter_nm: FloatArray, physics: FloatArray
) -> list[FloatArray]:
    """Return the trees' inputs on the grid, the finite barrier's shift interpolated."""
    d = diameter_nm[None, :]
    gap, electron, hole, dielectric = (
        frame[name].to_numpy(dtype=np.float64)[:, None]
        for name in ("gap_eV", "electron_mass_m0", "hole_mass_m0", "dielectric")
    )
    columns = physics_columns(d, gap, electron, hole, dielectric, physics - gap)
    return [np.broadcast_to(column, physics.shape) for column in columns]


def _exact_trees(grid: GridGap, frame: pd.DataFrame, at: IntArray, size: IntArray) -> FloatArray:
    if grid.weight >= 1.0 or not len(at):
        return np.zeros(len(at))
    pairs = frame.iloc[at].assign(diameter_nm=grid.diameter_nm[size])
    return grid.regressor.trees_at(grid.model.design(pairs))


def _exact_chance(
    model: "SizeGapModel",
    grid: GridGap,
    block: GridBlock,
    question: BlockQuestion,
    at: IntArray,
    size: IntArray,
    trees: FloatArray,
    shift: FloatArray,
    shift_sd: FloatArray,
) -> FloatArray:
    """Return the chance of pairs with everything exact."""
    if not len(at):
        return np.zeros(0)
    pairs = block.frame.iloc[at].assign(diameter_nm=grid.diameter_nm[size])
    physics, bulk_sd = model.physics_of(pairs)
    unit, weight = grid.scale[size], grid.weight
    gaussian = grid.mean_at(block, at, size)
    sd = grid.sd_at(block, at, size)
    centre = physics + unit * (weight * gaussian + (1.0 - weight) * trees) - shift[at]
    variance = sd**2 + weight * (1.0 - weight) * (gaussian - trees) ** 2 + grid.noise**2
    total = np.sqrt(variance * unit**2 + bulk_sd**2 + shift_sd[at] ** 2)
    calibration = model.states_[grid.state].calibration
    return calibration.chance_between(*question.window_eV, centre, total)
