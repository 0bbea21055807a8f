"""What a tight-binding set makes of the bulk: gap, electron mass, and whether to use it.

Energies in eV, masses over the free electron mass, wave vectors in units of 2 pi / a.
"""

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from features.confinement import KINETIC_eV_nm2
from features.tables import read_table
from features.tight_binding import (
    ParameterSet,
    bloch_hamiltonian,
    parameter_set,
    parameter_sets,
)

__all__ = [
    "MASS_TOLERANCE",
    "BulkEdges",
    "GAP_TOLERANCE_eV",
    "accepted_sets",
    "bulk_check",
    "bulk_edges",
    "electron_mass_m0",
]

GAP_TOLERANCE_eV = 0.15
"""Largest difference of a set's gap from the published one."""
MASS_TOLERANCE = 0.25
"""Largest relative difference of a set's electron mass from the published one."""

FloatArray = NDArray[np.float64]

_POINTS = 201
_STEP = 0.004


@dataclass(frozen=True)
class BulkEdges:
    """Band edges of the bulk.

    Attributes
    ----------
    valence_eV, conduction_eV : float
        Highest valence and lowest conduction energy.
    conduction_point : tuple of float
        Where the conduction band is lowest, units of 2 pi / a.
    """

    valence_eV: float
    conduction_eV: float
    conduction_point: tuple[float, float, float]

    @property
    def gap_eV(self) -> float:
        """Difference of the two edges."""
        return self.conduction_eV - self.valence_eV

    @property
    def middle_eV(self) -> float:
        """Middle of the gap."""
        return 0.5 * (self.conduction_eV + self.valence_eV)


def _edges_at(
    parameters: ParameterSet, points: FloatArray, *, spin_orbit: bool
) -> tuple[FloatArray, FloatArray]:
    """Return the highest valence and the lowest conduction band at each wave vector."""
    levels = np.linalg.eigvalsh(bloch_hamiltonian(parameters, points, spin_orbit=spin_orbit))
    filled = (5 if parameters.structure == "rocksalt" else 4) * (2 if spin_orbit else 1)
    return np.asarray(levels[:, filled - 1], float), np.asarray(levels[:, filled], float)


def bulk_edges(parameters: ParameterSet, *, spin_orbit: bool | None = None) -> BulkEdges:
    """Return the band edges along the lines from the zone's centre to X and to L.

    Parameters
    ----------
    parameters : ParameterSet
    spin_orbit : bool or None, default None
        None: where the set has a coupling.

    Returns
    -------
    BulkEdges

    Examples
    --------
    >>> round(bulk_edges(parameter_set("GaAs sp3d5s*")).gap_eV, 2)
    1.52
    """
    coupled = parameters.has_spin_orbit if spin_orbit is None else spin_orbit
    along = np.linspace(0.0, 1.0, _POINTS)[:, None]
    points = np.vstack([along * np.array([1.0, 0.0, 0.0]), along * np.full(3, 0.5)])
    valence, conduction = _edges_at(parameters, points, spin_orbit=coupled)
    lowest = int(np.argmin(conduction))
    x, y, z = (float(v) for v in points[lowest])
    return BulkEdges(float(valence.max()), float(conduction[lowest]), (x, y, z))


def electron_mass_m0(parameters: ParameterSet, point: tuple[float, float, float]) -> float:
    """Return the conductivity mass of the lowest conduction band at a wave vector.

    Three over the trace of the inverse mass tensor, by central differences.

    Parameters
    ----------
    parameters : ParameterSet
    point : tuple of float
        An extremum, units of 2 pi / a.

    Returns
    -------
    float

    Examples
    --------
    >>> round(electron_mass_m0(parameter_set("GaAs sp3d5s*"), (0.0, 0.0, 0.0)), 3)
    0.067
    """
    steps = np.vstack([np.zeros(3), _STEP * np.eye(3), -_STEP * np.eye(3)])
    centre = np.asarray(point)
    _, bands = _edges_at(parameters, centre + steps, spin_orbit=parameters.has_spin_orbit)
    curvature = (bands[1:].sum() - 6.0 * bands[0]) / _STEP**2
    kinetic = KINETIC_eV_nm2 * (2.0 * np.pi / parameters.lattice_a_nm) ** 2
    return float(3.0 * 2.0 * kinetic / curvature)


def bulk_check() -> pd.DataFrame:
    """Compare every set's gap and electron mass with the published ones.

    The published gap is that near 0 K where on record, to which sets are fitted, else that at
    300 K; where the conduction band is lowest away from the centre and the published mass belongs
    to the centre, the table's column ``mass_point`` says so.

    Returns
    -------
    pandas.DataFrame
        Indexed by parameter set: material, gap_eV, published_gap_eV, mass_m0, published_mass_m0,
        accepted.
    """
    bulk = read_table("bulk_semiconductors").set_index("material")
    rows = []
    for name, row in parameter_sets().iterrows():
        parameters = parameter_set(str(name))
        edges = bulk_edges(parameters)
        at_centre = row["mass_point"] == "Gamma"
        point = (0.0, 0.0, 0.0) if at_centre else edges.conduction_point
        constants = bulk.loc[parameters.material]
        cold = constants["gap_0K_eV"]
        rows.append(
            {
                "parameter_set": name,
                "material": parameters.material,
                "gap_eV": edges.gap_eV,
                "published_gap_eV": constants["gap_eV"] if pd.isna(cold) else cold,
                "mass_m0": electron_mass_m0(parameters, point),
                "published_mass_m0": constants["electron_mass_m0"],
            }
        )
    table = pd.DataFrame(rows).set_index("parameter_set")
    right_gap = (table["gap_eV"] - table["published_gap_eV"]).abs() <= GAP_TOLERANCE_eV
    ratio = table["mass_m0"] / table["published_mass_m0"]
    table["accepted"] = right_gap & ((ratio - 1.0).abs() <= MASS_TOLERANCE)
    return table


def accepted_sets() -> list[str]:
    """Return one accepted set a material, the one nearest to the published mass.

    Returns
    -------
    list of str
        Names, sorted.
    """
    table = bulk_check()
    table = table[table["accepted"]]
    miss = (table["mass_m0"] / table["published_mass_m0"]).apply(np.log).abs()
    return sorted(str(name) for name in miss.groupby(table["material"]).idxmin())
