"""Site counts against size: closed forms on a ladder of particles, monotone between the rungs.

When all facets of a crystal move out by whole layers and none vanishes, the number of atoms of
each site class is a polynomial in the layers (Ehrhart; for fcc shapes these are the closed forms
of van Hardeveld and Hartog, Surf. Sci. 15, 189 (1969)). The polynomials are found from explicit
particles and checked on others, so large particles need not be built. Between two rungs each
class follows a monotone cubic in the cube root of the number of atoms.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import combinations, permutations, product

import numpy as np
from numpy.typing import NDArray

from features.particle_lattice import IntArray
from features.particle_polyhedron import ExplicitParticle, SiteClass

__all__ = ["ClosedForms", "Ladder", "closed_forms", "shell_ladder"]

FloatArray = NDArray[np.float64]

_LARGEST_RESIDUAL = 1e-5


@dataclass(frozen=True)
class Ladder:
    """Particles of one shape by rising number of atoms.

    Attributes
    ----------
    classes : tuple of SiteClass
    n_atoms : ndarray, shape (n_rungs,)
        Rising.
    counts : ndarray, shape (n_rungs, n_classes)
        Atoms of each class.
    generalised : ndarray, shape (n_rungs, n_classes)
        Mean generalised coordination of each class; not a number where the class is empty.
    """

    classes: tuple[SiteClass, ...]
    n_atoms: FloatArray
    counts: FloatArray
    generalised: FloatArray

    @cached_property
    def _curve(self) -> Callable[[FloatArray], FloatArray]:
        from scipy.interpolate import PchipInterpolator  # noqa: PLC0415 - slow to load

        curve: Callable[[FloatArray], FloatArray] = PchipInterpolator(
            np.cbrt(self.n_atoms), self.counts, axis=0
        )
        return curve

    def counts_at(self, n_atoms: FloatArray) -> FloatArray:
        """Return the atoms of each class, shape (n_sizes, n_classes).

        Below the first rung the classes keep that rung's shares, and the surface's share rises to
        one at a single atom.
        """
        first = self.n_atoms[0]
        counts = self._curve(np.cbrt(np.clip(n_atoms, first, self.n_atoms[-1])))
        inner = 1.0 - self.counts[0].sum() / first
        share = 1.0 - inner * (n_atoms - 1.0) / max(first - 1.0, 1.0)
        small = self.counts[0] / self.counts[0].sum() * (n_atoms * share)[:, None]
        return np.maximum(np.where((n_atoms < first)[:, None], small, counts), 0.0)

    def generalised_at(self, n_atoms: FloatArray) -> FloatArray:
        """Return the mean generalised coordination of each class, shape (n_sizes, n_classes)."""
        x, rungs = np.cbrt(n_atoms), np.cbrt(self.n_atoms)
        columns = [
            np.interp(x, rungs[known], column[known])
            for column, known in zip(self.generalised.T, ~np.isnan(self.generalised.T), strict=True)
        ]
        return np.stack(columns, axis=1)


@dataclass(frozen=True)
class ClosedForms:
    """Polynomials of the site counts in the layers of each facet family.

    Attributes
    ----------
    classes : tuple of SiteClass
    middle : ndarray, shape (n_families,)
        Layers about which the polynomials are written.
    atoms : ndarray, shape (n_cubic_terms,)
        Coefficients of the number of atoms.
    counts, sums : ndarray, shape (n_quadratic_terms, n_classes)
        Coefficients of each class's atoms and of its summed generalised coordination.
    residual : float
        Largest deviation from the explicit particles, atoms.
    """

    classes: tuple[SiteClass, ...]
    middle: FloatArray
    atoms: FloatArray
    counts: FloatArray
    sums: FloatArray
    residual: float

    @property
    def is_exact(self) -> bool:
        """Whether the explicit particles that were not needed for the fit are met."""
        return self.residual < _LARGEST_RESIDUAL

    def at(self, layers: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return atoms, counts and coordination sums for layers of shape (n_sizes, n_families)."""
        steps = np.asarray(layers, dtype=np.float64) - self.middle
        site_terms = _terms(steps, degree=2)
        return (
            _terms(steps, degree=3) @ self.atoms,
            site_terms @ self.counts,
            site_terms @ self.sums,
        )


def _terms(steps: FloatArray, degree: int) -> FloatArray:
    """Return all monomials up to a degree, shape (n_steps, n_terms)."""
    powers = _powers(steps.shape[1], degree)
    return np.asarray(np.prod(steps[:, None, :] ** powers[None, :, :], axis=2))


def particle_rows(
    particles: Sequence[ExplicitParticle],
) -> tuple[tuple[SiteClass, ...], FloatArray, FloatArray]:
    """Return the union of classes, and counts and coordination sums by particle and class."""
    classes = tuple(sorted({c for p in particles for c in p.classes}))
    counts = [p.site_counts() for p in particles]
    sums = [p.coordination_sums() for p in particles]
    return (
        classes,
        np.array([[float(row.get(c, 0)) for c in classes] for row in counts]),
        np.array([[row.get(c, 0.0) for c in classes] for row in sums]),
    )


def _stencil(n_families: int) -> IntArray:
    """Return steps from the middle that fix all cubics, and a few more to check on.

    They stay within three layers, so that no facet appears or vanishes among them.
    """
    one = np.eye(n_families, dtype=np.int64)
    steps = [0 * one[0], *one, *-one, *(2 * one), 3 * one.sum(axis=0), -2 * one.sum(axis=0)]
    steps += [one[i] - one[j] for i, j in permutations(range(n_families), 2)]
    for size in (2, 3):
        steps += [one[list(few)].sum(axis=0) for few in combinations(range(n_families), size)]
    return np.array(steps)


def _powers(n_families: int, degree: int) -> IntArray:
    grid = np.array(list(product(range(degree + 1), repeat=n_families)), dtype=np.int64)
    return np.asarray(grid[grid.sum(axis=1) <= degree])


def closed_forms(build: Callable[[IntArray], ExplicitParticle], middle: IntArray) -> ClosedForms:
    """Find the polynomials of the site counts near a particle, and check them.

    Parameters
    ----------
    build : callable
        Builds the particle of given layers of each family.
    middle : ndarray of int, shape (n_families,)
        Layers of the particle about which to expand; within three layers of it all particles must
        have the same facets.

    Returns
    -------
    ClosedForms
        Sites quadratic, atoms cubic in the layers, fitted to particles within three layers; there
        are more particles than coefficients, so a fit that holds has been checked.

    Examples
    --------
    >>> from features.particle_shapes import explicit_particle
    >>> forms = closed_forms(lambda n: explicit_particle("fcc", "octahedron", int(n[0])),
    ...     np.array([5]))
    >>> forms.is_exact, round(float(forms.at(np.array([[19.0]]))[0][0]))
    (True, 5340)
    """
    steps = _stencil(len(middle))
    particles = [build(middle + step) for step in steps]
    classes, counts, sums = particle_rows(particles)
    atoms = np.array([float(p.n_atoms) for p in particles])
    site_fit, site_residual = _solve(steps, np.column_stack([counts, sums]), degree=2)
    atom_fit, atom_residual = _solve(steps, atoms[:, None], degree=3)
    n = len(classes)
    return ClosedForms(
        classes,
        middle.astype(np.float64),
        atom_fit[:, 0],
        site_fit[:, :n],
        site_fit[:, n:],
        max(site_residual, atom_residual),
    )


def _solve(steps: IntArray, values: FloatArray, degree: int) -> tuple[FloatArray, float]:
    """Return the coefficients of least squares and the largest residual."""
    terms = _terms(steps.astype(np.float64), degree)
    fit = np.asarray(np.linalg.lstsq(terms, values, rcond=None)[0], dtype=np.float64)
    return fit, float(np.abs(terms @ fit - values).max())


def mean_generalised(counts: FloatArray, sums: FloatArray, fewest: float = 0.5) -> FloatArray:
    """Return sums over counts; not a number where a class has fewer sites than it ever reaches."""
    least = np.minimum(fewest, counts.max(axis=0))
    return np.asarray(sums / np.where(counts >= least, counts, np.nan))


def shell_ladder(
    build: Callable[[int], ExplicitParticle], n_explicit: int, largest_n_atoms: float
) -> Ladder:
    """Return the ladder of a series of closed shells.

    Parameters
    ----------
    build : callable
        Builds the particle of a shell, from 1.
    n_explicit : int, >= 7
        Shells that are built; the last six of them give and check the closed forms.
    largest_n_atoms : float
        The ladder ends just above.

    Returns
    -------
    Ladder

    Examples
    --------
    >>> from features.particle_shapes import explicit_particle
    >>> ladder = shell_ladder(lambda n: explicit_particle("fcc", "cube", n), 8, 1e4)
    >>> ladder.n_atoms[:3].tolist()
    [14.0, 63.0, 172.0]
    """
    forms = closed_forms(lambda n: build(int(n[0])), np.array([n_explicit - 3]))
    built = [build(n) for n in range(1, n_explicit + 1)]
    classes, counts, sums = particle_rows(built)
    atoms = np.array([float(p.n_atoms) for p in built])
    guess = (largest_n_atoms / forms.atoms[-1]) ** (1.0 / 3.0) + n_explicit
    shells = np.arange(n_explicit + 1, int(guess) + 2, dtype=np.float64)[:, None]
    more_atoms, more_counts, more_sums = forms.at(shells)
    column = [classes.index(c) for c in forms.classes]
    wide = np.zeros((2, len(shells), len(classes)))
    wide[0][:, column], wide[1][:, column] = more_counts, more_sums
    counts, sums = np.concatenate([counts, wide[0]]), np.concatenate([sums, wide[1]])
    return Ladder(
        classes, np.concatenate([atoms, more_atoms]), counts, mean_generalised(counts, sums)
    )
