"""Computed size laws: band-edge states of crystallites of every accepted parameter set.

Energies in eV, lengths in nm. ``python -m features.computed_dots`` extends the packaged table
(``make tables``): rows on record stay, what is missing is computed and written at once, so that an
interrupted run goes on where it stopped. The table depends on nothing but the parameter table.
"""

import sys
import time
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd

from features.bulk_bands import BulkEdges, accepted_sets, bulk_edges
from features.edge_states import coulomb_attraction_eV, edge_states
from features.nanocrystal import spherical_crystallite
from features.tables import packaged_path
from features.tight_binding import ParameterSet, orbital_columns, parameter_set

__all__ = ["CUTTING_DIAMETERS_nm", "compute_dot", "couples_spin", "planned_dots", "write_table"]

CUTTING_DIAMETERS_nm = (1.2, 1.5, 1.8, 2.1, 2.5, 3.0, 3.5, 4.0, 5.0, 6.0, 7.0)
_BOTH_CENTRES_UP_TO_nm = 3.5
_LARGEST_BLOCK = 16_000
_SMALLEST_SPLITTING_eV = 0.1
_KEYS = ["parameter_set", "cutting_diameter_nm", "centre"]


def couples_spin(parameters: ParameterSet) -> bool:
    """Return whether crystallites of a set are computed with spin-orbit coupling.

    Where the coupling splits the valence band by less than 0.1 eV it moves the edges of dot and
    bulk alike, and the matrix stays real and half as large without it.

    Examples
    --------
    >>> couples_spin(parameter_set("InAs sp3d5s*")), couples_spin(parameter_set("Si sp3d5s*"))
    (True, False)
    """
    return 3.0 * max(parameters.spin_orbit_eV.values(), default=0.0) >= _SMALLEST_SPLITTING_eV


@cache
def _edges(parameter_set_name: str) -> BulkEdges:
    parameters = parameter_set(parameter_set_name)
    return bulk_edges(parameters, spin_orbit=couples_spin(parameters))


def compute_dot(
    parameter_set_name: str, cutting_diameter_nm: float, centre: str
) -> dict[str, object]:
    """Compute one crystallite.

    Parameters
    ----------
    parameter_set_name : str
        As in the table ``tight_binding``.
    cutting_diameter_nm : float
        Diameter of the cutting sphere, nm.
    centre : {"anion", "cation"}
        Atom at the centre.

    Returns
    -------
    dict
        Columns of the table ``computed_dots``: ``confinement_eV`` is the gap of independent
        carriers beyond the set's bulk gap, ``attraction_eV`` the first-order attraction at
        dielectric constant 1.

    Examples
    --------
    >>> row = compute_dot("ZnSe sp3s*", 1.5, "anion")
    >>> row["atoms"], round(float(row["confinement_eV"]), 1)
    (87, 1.8)
    """
    parameters = parameter_set(parameter_set_name)
    crystal = spherical_crystallite(
        parameters.structure,
        parameters.lattice_a_nm,
        cutting_diameter_nm,
        cation_centred=centre == "cation",
    )
    edges = _edges(parameter_set_name)
    coupled = couples_spin(parameters)
    states = edge_states(parameters, crystal, edges.middle_eV, spin_orbit=coupled)
    return {
        "parameter_set": parameter_set_name,
        "material": parameters.material,
        "cutting_diameter_nm": cutting_diameter_nm,
        "centre": centre,
        "spin_orbit": str(coupled).lower(),
        "atoms": len(crystal.is_cation),
        "diameter_nm": round(crystal.diameter_nm, 4),
        "confinement_eV": round(states.gap_eV - edges.gap_eV, 5),
        "electron_confinement_eV": round(states.lumo_eV - edges.conduction_eV, 5),
        "attraction_eV": round(coulomb_attraction_eV(crystal, states, 1.0), 4),
        "largest_block": states.largest_block,
        "residual_eV": float(f"{states.residual_eV:.1e}"),
    }


def planned_dots() -> Iterator[tuple[str, float, str]]:
    """Yield set, cutting diameter and centre of every row of the table, small ones first.

    Rocksalt sets are left out: without a published passivation their surfaces bring states into
    the gap, and it jumps from size to size.
    """
    sets = [parameter_set(name) for name in accepted_sets()]
    sets = [parameters for parameters in sets if parameters.passivated]
    for diameter in CUTTING_DIAMETERS_nm:
        for parameters in sets:
            if _block_size(parameters, diameter) > _LARGEST_BLOCK:
                continue
            yield parameters.name, diameter, "anion"
            if diameter <= _BOTH_CENTRES_UP_TO_nm and parameters.structure != "diamond":
                yield parameters.name, diameter, "cation"


def _block_size(parameters: ParameterSet, diameter_nm: float) -> float:
    """Estimate the largest matrix to factor."""
    atoms = np.pi / 6.0 * 8.0 * (diameter_nm / parameters.lattice_a_nm) ** 3
    orbitals = atoms * len(orbital_columns(parameters))
    if not couples_spin(parameters):
        return float(orbitals) / 4.0
    return float(orbitals) / (4.0 if parameters.structure == "rocksalt" else 2.0)


def write_table(path: Path) -> None:
    """Compute what the table lacks; one line of progress a crystallite.

    Parameters
    ----------
    path : Path
        The CSV file; rows that are no longer planned are dropped.
    """
    planned = list(planned_dots())
    done = _rows_on_record(path)
    for i, key in enumerate(planned):
        if key in done:
            continue
        start = time.perf_counter()
        done[key] = compute_dot(*key)
        _write(path, [done[k] for k in planned if k in done])
        seconds = time.perf_counter() - start
        sys.stdout.write(
            f"{i + 1}/{len(planned)} {key} {done[key]['atoms']} atoms {seconds:.1f} s\n"
        )
        sys.stdout.flush()
    _write(path, [done[k] for k in planned])


def _rows_on_record(path: Path) -> dict[tuple[str, float, str], dict[str, object]]:
    if not path.exists() or not path.stat().st_size:
        return {}
    records = pd.read_csv(path, dtype={"spin_orbit": str}).to_dict("records")
    return {
        (str(r["parameter_set"]), float(r["cutting_diameter_nm"]), str(r["centre"])): {
            str(k): v for k, v in r.items()
        }
        for r in records
    }


def _write(path: Path, rows: list[dict[str, object]]) -> None:
    table = pd.DataFrame(rows).sort_values(_KEYS)
    table["spin_orbit"] = table["spin_orbit"].astype(str).str.lower()
    table.to_csv(path, index=False, lineterminator="\n")


if __name__ == "__main__":
    write_table(
        Path(sys.argv[1]) if len(sys.argv) > 1 else packaged_path("datasets") / "computed_dots.csv"
    )
