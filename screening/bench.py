"""How fast a sweep is, beside the plain way with scikit-learn, in one run.

Run as ``python -m screening.bench [FILE]``; writes the page and prints it. The plain pipeline makes
the same features with pandas, predicts with scikit-learn's own Gaussian process and boosted trees
on the same rows, and turns mean and standard deviation into the same calibrated chance.
"""

import resource
import sys
import time
from collections.abc import Callable
from itertools import islice
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from joblib import parallel_config
from scipy.linalg import get_blas_funcs
from sklearn.gaussian_process import GaussianProcessRegressor
from sklearn.gaussian_process.kernels import RBF, ConstantKernel

from features.emission import stokes_shifts
from features.tables import packaged_path
from screening.blending import boosted_trees
from screening.candidates import pair_frame, size_grid
from screening.covariance import FloatArray
from screening.dot_design import scale_of
from screening.dots import NEW, SizeGapModel
from screening.emission_track import EmissionTrack
from screening.ranking import shortlist_of
from screening.specification import Specification, load_specification
from screening.sweep import Sweep, enumerate_compositions
from screening.trained import trained_dots

__all__ = ["main", "plain_pipeline", "run_bench"]

_SIZES = (10_000, 100_000, 1_000_000, 10_000_000)
_PLAIN_PAIRS = 20_000
_WHOLE_PAIRS = 100_000
_CHUNK = 5_000


def plain_pipeline(
    model: SizeGapModel,
) -> Callable[[pd.DataFrame, tuple[float, float]], FloatArray]:
    """Return the straightforward pipeline: pairs in, calibrated chances out.

    Parameters
    ----------
    model : SizeGapModel
        Lends its training rows and its calibration.

    Returns
    -------
    callable
        Takes a frame as from `screening.candidates.pair_frame` and a window in eV.
    """
    X, mean, scale = model.training_design()
    y = (model.rows_["optical_gap_eV"].to_numpy() - mean) / scale
    kernel = ConstantKernel(0.5, "fixed") * RBF(np.full(4, 1.5), "fixed")
    noise = (model.rows_["noise_eV"].to_numpy() / scale) ** 2
    gaussian = GaussianProcessRegressor(kernel, alpha=noise + 1e-4, optimizer=None)
    gaussian.fit(X[:, :4], y)
    trees = boosted_trees().fit(X[:, 10:], y)

    def chances(pairs: pd.DataFrame, window_eV: tuple[float, float]) -> FloatArray:
        columns = model.design(pairs)
        physics, spread = model.physics_of(pairs)
        unit = scale_of(pairs)
        smooth, sd = gaussian.predict(columns[:, :4], return_std=True)
        learned = 0.7 * smooth + 0.3 * trees.predict(columns[:, 10:])
        shifts = stokes_shifts(pairs["material"].tolist(), pairs["family"].tolist())
        centre = physics + unit * learned - shifts["stokes_shift_eV"].to_numpy()
        total = np.sqrt((sd * unit) ** 2 + spread**2 + shifts["stokes_sd_eV"].to_numpy() ** 2)
        calibration = model.states_[NEW].calibration
        return np.asarray(calibration.chance_between(*window_eV, centre, total))

    return chances


def _pairs(names: list[str], sizes: np.ndarray) -> pd.DataFrame:
    return pair_frame(
        pd.DataFrame(
            {
                "material": np.repeat(names, len(sizes)),
                "diameter_nm": np.tile(sizes, len(names)),
            }
        )
    )


def _timed(call: Callable[[], Any]) -> tuple[float, Any]:
    start = time.perf_counter()
    result = call()
    return time.perf_counter() - start, result


def _peak_MB() -> float:
    own = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return (own + resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss) / 1024.0


def _multiply_rate() -> float:
    """Return the measured rate of a matrix multiplication on one core, GFLOP/s."""
    a = np.random.default_rng(0).normal(size=(1500, 1500))
    (gemm,) = get_blas_funcs(("gemm",), (a, a))
    seconds, _ = _timed(lambda: gemm(1.0, a, a))
    return 2.0 * 1500**3 / seconds / 1e9


class _Limited(Sweep):
    """A sweep over the first compositions only."""

    n_compositions = 0

    def _names(self, named: list[str]) -> Any:
        yield from islice(super()._names(named), self.n_compositions)


def _sweep(
    specification: Specification, model: SizeGapModel, n_compositions: int, jobs: int
) -> tuple[float, Sweep, list[str]]:
    track = EmissionTrack(specification)
    sweep = _Limited(specification, model, track)
    sweep.n_compositions = n_compositions
    with parallel_config(n_jobs=jobs):
        seconds, listed = _timed(lambda: sweep.run([]))
    return seconds, sweep, listed


def _whole(
    specification: Specification, model: SizeGapModel, names: list[str]
) -> tuple[float, pd.DataFrame]:
    """Score every pair in full and cut the list."""
    track = EmissionTrack(specification)
    sizes = size_grid(specification.candidates)

    def run() -> pd.DataFrame:
        parts = [
            track.score(model, _pairs(names[at : at + 50], sizes))
            for at in range(0, len(names), 50)
        ]
        return shortlist_of(pd.concat(parts, ignore_index=True), specification, track)

    return _timed(run)


def run_bench(jobs: int = 2) -> str:
    """Measure and return the page.

    Parameters
    ----------
    jobs : int, default 2
        Workers of the sweep.

    Returns
    -------
    str
        Markdown.
    """
    specification = load_specification(packaged_path("configs", "wide-sweep.toml"))
    model, sizes = trained_dots(specification.seed), size_grid(specification.candidates)
    names = list(islice(enumerate_compositions(specification.candidates), _WHOLE_PAIRS // 90))
    chances = plain_pipeline(model)
    few = names[: max(1, _PLAIN_PAIRS // len(sizes))]
    window = specification.target.energies_eV

    def plain() -> None:
        for at in range(0, len(few), max(1, _CHUNK // len(sizes))):
            chances(_pairs(few[at : at + _CHUNK // len(sizes)], sizes), window)

    plain_s, _ = _timed(plain)
    plain_rate = len(few) * len(sizes) / plain_s
    whole_s, listed = _whole(specification, model, names)
    _, _, found = _sweep(specification, model, len(names), jobs)
    same = sorted(set(listed["material"])) == found
    rows = []
    for pairs in _SIZES:
        seconds, sweep, _ = _sweep(specification, model, pairs // len(sizes), jobs)
        counts = sweep.counts
        rate = counts.pairs / seconds
        rows.append(
            f"| {counts.pairs:,} | {seconds:.1f} | {rate:,.0f} | {rate / plain_rate:.1f} | "
            f"{_peak_MB():.0f} | {counts.with_trees / counts.pairs:.2%} | "
            f"{counts.solved / counts.pairs:.2%} | {counts.scored:,} |"
        )
    return _page(rows, plain_rate, len(names) * len(sizes) / whole_s, jobs, same=same)


def _page(rows: list[str], plain_rate: float, whole_rate: float, jobs: int, *, same: bool) -> str:
    verdict = "the same" if same else "NOT the same"
    table = "\n".join(rows)
    return f"""# How fast a sweep is

Written by `make bench` on one machine; seconds depend on it, ratios less so.

- The plain pipeline (pandas features, scikit-learn's Gaussian process with `return_std`, boosted
  trees, a calibrated chance a pair): {plain_rate:,.0f} pairs/s.
- Every pair scored in full by this program: {whole_rate:,.0f} pairs/s; the sweep's list of 100 on
  the same {_WHOLE_PAIRS:,} pairs is {verdict}.
- A matrix multiplication on one core: {_multiply_rate():.0f} GFLOP/s.

`configs/wide-sweep.toml`, first compositions, {jobs} workers; making the compositions and their
bulk constants is part of the time.

| pairs | seconds | pairs/s | over plain | peak MB | need trees | need a solve | scored in full |
|---|---|---|---|---|---|---|---|
{table}
"""


def main() -> None:
    """Write the page."""
    page = run_bench()
    if len(sys.argv) > 1:
        Path(sys.argv[1]).write_text(page, encoding="utf-8")
    sys.stdout.write(page)


if __name__ == "__main__":
    main()
