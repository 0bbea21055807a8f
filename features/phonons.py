"""Lattice thermal conductivity limited by the boundary of a wire, film or particle.

Sizes and mean free paths in nm, conductivities in W/(m K), near 300 K. kappa = C v L / 3 with
1/L = 1/L_bulk + 1/(F s), s the boundary's own path and F = (1 + p) / (1 - p) for a share p of
mirror-like reflections (Casimir, Physica 5, 495 (1938); Ziman, Electrons and Phonons (1960)).
Neglects confinement of the phonons themselves, so it is for sizes above about 5 nm, and the
electrons' share of the heat.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from features.errors import UnknownMaterialError, explain
from features.stability_inputs import FloatArray, known_shape, positive, within
from features.tables import read_table

__all__ = [
    "ConductivityEstimate",
    "LEAST_SIZE_nm",
    "boundary_limited_conductivity_W_mK",
    "boundary_path_nm",
    "conductivity_estimate",
]

LEAST_SIZE_nm = 5.0
"""Below this size phonon confinement is not negligible."""

_PATH_OVER_SIZE = {"sphere": 1.0, "wire": 1.0, "film_across": 0.75, "film_along": 8.0 / 3.0}


@dataclass(frozen=True)
class ConductivityEstimate:
    """Lattice thermal conductivity of one material against size.

    Attributes
    ----------
    conductivity_W_mK, sigma_W_mK : ndarray
        Value and standard uncertainty, from the bulk value and from the mean free path.
    is_valid : ndarray of bool
        False below `LEAST_SIZE_nm`.
    """

    conductivity_W_mK: FloatArray
    sigma_W_mK: FloatArray
    is_valid: NDArray[np.bool_]


def boundary_path_nm(
    size_nm: ArrayLike, *, shape: str = "wire", specularity: ArrayLike = 0.0
) -> FloatArray:
    """Return the mean free path between collisions with the boundary.

    Parameters
    ----------
    size_nm : array-like
        Diameter, or thickness of a film, nm, > 0.
    shape : {"sphere", "wire", "film_across", "film_along"}
        Path over size: 1, 1, 3/4 and 8/3 for a diffuse boundary; ``film_along`` is the thick-film
        limit of Fuchs and Sondheimer.
    specularity : array-like
        Share of mirror-like reflections, 0 to below 1.

    Returns
    -------
    ndarray
        Path, nm.

    Raises
    ------
    PhysicsRangeError
        If an input is out of range or the shape unknown.

    Examples
    --------
    >>> float(boundary_path_nm(20.0, shape="film_across"))
    15.0
    """
    (size,) = positive(size_nm=size_nm)
    p = within("specularity", specularity, -1e-12, 1.0)
    return known_shape(shape, _PATH_OVER_SIZE) * size * (1.0 + p) / (1.0 - p)


def boundary_limited_conductivity_W_mK(
    size_nm: ArrayLike,
    *,
    bulk_conductivity_W_mK: ArrayLike,
    bulk_path_nm: ArrayLike,
    shape: str = "wire",
    specularity: ArrayLike = 0.0,
) -> FloatArray:
    """Return the conductivity with bulk and boundary scattering added as rates.

    kappa_bulk / (1 + L_bulk / L_boundary).

    Parameters
    ----------
    size_nm, shape, specularity
        As for `boundary_path_nm`.
    bulk_conductivity_W_mK, bulk_path_nm : array-like
        All > 0. The path should be the one that carries half of the heat: the single path of
        kinetic theory understates the effect (silicon: 41 nm against about 300 nm).

    Returns
    -------
    ndarray
        Conductivity, W/(m K).

    Raises
    ------
    PhysicsRangeError
        If an input is out of range or the shape unknown.

    Examples
    --------
    >>> float(boundary_limited_conductivity_W_mK(300.0, bulk_conductivity_W_mK=148.0,
    ...     bulk_path_nm=300.0))
    74.0
    """
    bulk, path = positive(bulk_conductivity_W_mK=bulk_conductivity_W_mK, bulk_path_nm=bulk_path_nm)
    return bulk / (1.0 + path / boundary_path_nm(size_nm, shape=shape, specularity=specularity))


def conductivity_estimate(
    material: str,
    size_nm: ArrayLike,
    *,
    shape: str = "wire",
    specularity: ArrayLike = 0.0,
) -> ConductivityEstimate:
    """Return the lattice thermal conductivity of a material on record, at 300 K.

    Parameters
    ----------
    material : str
        Formula as in the table ``phonons``.
    size_nm, shape, specularity
        As for `boundary_path_nm`.

    Returns
    -------
    ConductivityEstimate
        First-order propagation of the two recalled constants' uncertainties.

    Raises
    ------
    UnknownMaterialError
        If the material is not in the table.
    PhysicsRangeError
        If an input is out of range or the shape unknown.

    Examples
    --------
    >>> wires = conductivity_estimate("Si", [22.0, 115.0])
    >>> wires.conductivity_W_mK.round().tolist()
    [10.0, 41.0]
    """
    table = read_table("phonons").set_index("material")
    if material not in table.index:
        raise UnknownMaterialError(
            explain(
                "no phonon constants", where=material, expected=f"one of {', '.join(table.index)}"
            )
        )
    row = table.to_dict("index")[material]
    bulk, path = row["bulk_conductivity_W_mK"], row["effective_path_nm"]
    value = boundary_limited_conductivity_W_mK(
        size_nm,
        bulk_conductivity_W_mK=bulk,
        bulk_path_nm=path,
        shape=shape,
        specularity=specularity,
    )
    # d ln(kappa) / d ln(path) = -(1 - kappa/kappa_bulk)
    from_path = row["path_uncertainty_nm"] / path * (1.0 - value / bulk)
    from_bulk = row["conductivity_uncertainty_W_mK"] / bulk
    size = np.asarray(size_nm, dtype=np.float64)
    return ConductivityEstimate(
        value, value * np.hypot(from_path, from_bulk), size >= LEAST_SIZE_nm
    )
