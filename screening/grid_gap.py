"""The emission-track model on a grid of compositions and sizes, fast and in parts.

The covariance of the Gaussian process is a sum of terms that fall apart into a factor of the
composition and a factor of the size. Both are evaluated once, and the mean of a whole grid is a
few matrix products. Standard deviations cost a triangular solve a point and are asked for where
they are needed. Physics means and spreads are smooth in the logarithm of the size: they are
evaluated at Chebyshev nodes and interpolated where only a bound is wanted.
"""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.linalg import solve_triangular

from features.confinement import coulomb_energy_eV
from features.finite_barrier import finite_barrier_energy_eV
from screening.covariance import CovarianceTerm, FloatArray, TermParameters
from screening.dot_design import scale_of, size_coordinate

if TYPE_CHECKING:
    from screening.dots import SizeGapModel

__all__ = ["GridBlock", "GridGap", "IntArray", "chebyshev_matrix"]

IntArray = NDArray[np.int64]

_SIZE_COLUMN = 3
_BARRIER_EV = 3.5
_MASS_STEP = 0.05
_N_NODES = 10


def chebyshev_matrix(values: FloatArray, n_nodes: int) -> tuple[FloatArray, FloatArray]:
    """Return Chebyshev nodes over the range of values and the matrix that interpolates to them.

    Parameters
    ----------
    values : ndarray of shape (n_values,)
    n_nodes : int

    Returns
    -------
    nodes : ndarray of shape (n_nodes,)
    matrix : ndarray of shape (n_values, n_nodes)
        Times function values at the nodes gives those at ``values``.

    Examples
    --------
    >>> nodes, matrix = chebyshev_matrix(np.linspace(0.0, 1.0, 5), 4)
    >>> bool(np.allclose(matrix @ nodes**3, np.linspace(0.0, 1.0, 5) ** 3))
    True
    """
    low, high = float(values.min()), float(values.max())
    angles = (2.0 * np.arange(n_nodes) + 1.0) * np.pi / (2.0 * n_nodes)
    unit = np.cos(angles)
    half = max(0.5 * (high - low), 1e-12)
    nodes = 0.5 * (low + high) + half * unit
    basis = np.polynomial.chebyshev.chebvander((values - 0.5 * (low + high)) / half, n_nodes - 1)
    at_nodes = np.polynomial.chebyshev.chebvander(unit, n_nodes - 1)
    return nodes, np.asarray(basis @ np.linalg.inv(at_nodes))


@dataclass(frozen=True)
class GridBlock:
    """Some compositions, ready to be met with every size.

    Parameters
    ----------
    frame : pandas.DataFrame
        One row a composition with its bulk constants, shape and structure.
    factors : tuple of ndarray, each of shape (n_compositions, n_rows)
        Composition's factor of the covariance to the training rows, one for each size factor.
    prior : ndarray of shape (n_compositions, n_factors)
        Composition's own variance by size factor.
    """

    frame: pd.DataFrame
    factors: tuple[FloatArray, ...]
    prior: FloatArray


class GridGap:
    """One state's regressor of the emission track on fixed sizes.

    Parameters
    ----------
    model : SizeGapModel
        Fitted and calibrated.
    state : str
        *on record* or *new*; all compositions of a block must be of this state.
    diameter_nm : ndarray of shape (n_sizes,)
        Rising sizes, nm.
    """

    def __init__(self, model: "SizeGapModel", state: str, diameter_nm: FloatArray) -> None:
        regressor = model.regressor(state)
        gaussian = regressor.gaussian_
        self.model, self.state, self.diameter_nm = model, state, diameter_nm
        self.weight = model.states_[state].gaussian_weight
        self.noise = gaussian.noise_
        self.regressor = regressor
        self._X, self._alpha, self._cholesky = gaussian.factorised()
        self._terms = list(zip(gaussian.terms_, gaussian.term_parameters().values(), strict=True))
        self._lengths = self._size_lengths()
        self.scale = scale_of(pd.DataFrame({"diameter_nm": diameter_nm}))
        self._sizes = self._size_factors(size_coordinate(diameter_nm))

    def _size_lengths(self) -> list[float | None]:
        """Return the different length scales in size; None for terms without one."""
        found: list[float | None] = []
        for term, parameters in self._terms:
            if term.smoothness != "smooth":
                raise ValueError(f"term {term.name} does not fall apart into two factors")
            length = _size_length(term, parameters)
            if length not in found:
                found.append(length)
        return found

    def _size_factors(self, coordinate: FloatArray) -> list[FloatArray | None]:
        """Return each size factor between sizes and training rows; None where it is one."""
        rows = self._X[:, _SIZE_COLUMN]
        return [
            None if length is None else np.exp(-0.5 * ((coordinate[:, None] - rows) / length) ** 2)
            for length in self._lengths
        ]

    def block(self, frame: pd.DataFrame) -> GridBlock:
        """Prepare compositions.

        Parameters
        ----------
        frame : pandas.DataFrame
            As from `screening.candidates.pair_frame`, one row a composition, any diameter.

        Returns
        -------
        GridBlock
        """
        X = self.model.design(frame)
        factors = [np.zeros((len(X), len(self._X))) for _ in self._lengths]
        prior = np.zeros((len(X), len(self._lengths)))
        for term, parameters in self._terms:
            at = self._lengths.index(_size_length(term, parameters))
            value, own = _composition_factor(term, parameters, X, self._X)
            factors[at] += value
            prior[:, at] += own
        return GridBlock(frame, tuple(factors), prior)

    def gaussian_mean(self, block: GridBlock) -> FloatArray:
        """Return the Gaussian process' mean (eV nm) of every composition at every size.

        Returns
        -------
        ndarray of shape (n_compositions, n_sizes)
        """
        total = np.zeros((len(block.frame), len(self.diameter_nm)))
        for factor, size in zip(block.factors, self._sizes, strict=True):
            weighted = factor * self._alpha
            total += weighted.sum(axis=1)[:, None] if size is None else weighted @ size.T
        return total

    def mean_at(self, block: GridBlock, composition: IntArray, size: IntArray) -> FloatArray:
        """Return the mean (eV nm) at pairs of composition and size.

        Returns
        -------
        ndarray of shape (n_pairs,)
        """
        total = np.zeros(len(composition))
        for factor, part in zip(block.factors, self._sizes, strict=True):
            cross = factor[composition] if part is None else factor[composition] * part[size]
            total += cross @ self._alpha
        return total

    def gaussian_sd(
        self, block: GridBlock, at: IntArray, sizes: list[FloatArray | None]
    ) -> FloatArray:
        """Return the standard deviation (eV nm) at points given by composition and size factors."""
        cross = np.zeros((len(at), len(self._X)))
        for factor, size in zip(block.factors, sizes, strict=True):
            cross += factor[at] if size is None else factor[at] * size
        half = solve_triangular(self._cholesky, cross.T, lower=True, check_finite=False)
        variance = block.prior[at].sum(axis=1) - np.einsum("ij,ij->j", half, half)
        return np.asarray(np.sqrt(np.maximum(variance, 0.0)), dtype=np.float64)

    def sd_at(self, block: GridBlock, composition: IntArray, size: IntArray) -> FloatArray:
        """Return the standard deviation (eV nm) at pairs of composition and size.

        Parameters
        ----------
        block : GridBlock
        composition, size : ndarray of int, shape (n_pairs,)

        Returns
        -------
        ndarray of shape (n_pairs,)
        """
        chosen = [None if part is None else part[size] for part in self._sizes]
        return self.gaussian_sd(block, composition, chosen)

    def sd_interpolated(self, block: GridBlock) -> FloatArray:
        """Return the standard deviation (eV nm) of the whole grid, from Chebyshev nodes in size.

        Returns
        -------
        ndarray of shape (n_compositions, n_sizes)
        """
        nodes, matrix = chebyshev_matrix(np.log(self.diameter_nm), _N_NODES)
        factors = self._size_factors(size_coordinate(np.exp(nodes)))
        n = len(block.frame)
        found = np.empty((n, _N_NODES))
        for node in range(_N_NODES):
            chosen = [None if part is None else part[node] for part in factors]
            found[:, node] = self.gaussian_sd(block, np.arange(n), chosen)
        return np.maximum(found @ matrix.T, 0.0)

    def physics(self, block: GridBlock) -> tuple[FloatArray, FloatArray]:
        """Return physics mean and spread left by the bulk constants (eV), from nodes in size.

        Returns
        -------
        mean, spread : ndarray of shape (n_compositions, n_sizes)
        """
        nodes, matrix = chebyshev_matrix(np.log(self.diameter_nm), _N_NODES)
        mean, spread = _physics(block.frame, np.exp(nodes))
        return mean @ matrix.T, np.maximum(spread @ matrix.T, 0.0)


def _size_length(term: CovarianceTerm, parameters: TermParameters) -> float | None:
    """Return a term's length scale in size, or None where it does not read the size."""
    if _SIZE_COLUMN not in term.columns:
        return None
    return float(parameters.per_column(term)[term.columns.index(_SIZE_COLUMN)])


def _composition_factor(
    term: CovarianceTerm, parameters: TermParameters, X: FloatArray, rows: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return a term's factor of the composition, and its own variance there."""
    value = np.full((len(X), len(rows)), parameters.amplitude**2)
    own = np.full(len(X), parameters.amplitude**2)
    lengths = parameters.per_column(term)
    for column, length in zip(term.columns, lengths, strict=True):
        if column != _SIZE_COLUMN:
            away = (X[:, column][:, None] - rows[:, column]) / length
            value *= np.exp(-0.5 * away**2)
    for label in term.labels:
        value *= (X[:, label][:, None] == rows[:, label]) & (X[:, label] >= 0.0)[:, None]
    if term.scale is not None:
        value *= np.outer(X[:, term.scale], rows[:, term.scale])
        own *= X[:, term.scale] ** 2
    return value, own


def _physics(frame: pd.DataFrame, diameter_nm: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return mean and spread of the finite-barrier gap for all compositions and sizes."""
    d = diameter_nm[None, :]
    gap, gap_sd, electron, hole, dielectric = (
        frame[name].to_numpy(dtype=np.float64)[:, None]
        for name in ("gap_eV", "gap_sd_eV", "electron_mass_m0", "hole_mass_m0", "dielectric")
    )
    coulomb = coulomb_energy_eV(d, dielectric)
    mean = gap + coulomb
    variance = np.broadcast_to(gap_sd**2, mean.shape).copy()
    known = (
        frame["basis"].eq("record").to_numpy()
        if "basis" in frame
        else np.ones(len(frame), dtype=bool)
    )
    up, down = np.exp(_MASS_STEP), np.exp(-_MASS_STEP)
    for name, mass in (("electron_mass_m0", electron), ("hole_mass_m0", hole)):
        mean = mean + finite_barrier_energy_eV(d, mass, _BARRIER_EV)
        if known.all():
            continue
        change = finite_barrier_energy_eV(d, mass * up, _BARRIER_EV) - finite_barrier_energy_eV(
            d, mass * down, _BARRIER_EV
        )
        variance += (change / (2.0 * _MASS_STEP) * _log_sd(frame, name)) ** 2
    if not known.all():
        change = coulomb_energy_eV(d, dielectric * up) - coulomb_energy_eV(d, dielectric * down)
        variance += (change / (2.0 * _MASS_STEP) * _log_sd(frame, "dielectric")) ** 2
    variance[known] = (gap_sd**2)[known]
    return mean, np.sqrt(variance)


def _log_sd(frame: pd.DataFrame, name: str) -> FloatArray:
    return frame[f"{name}_log_sd"].to_numpy(dtype=np.float64)[:, None]
