"""Electronic and structural descriptors of metal surfaces and of binary alloys.

Energies in eV against the Fermi level, lengths in nm. The d-band picture follows Hammer and
Norskov, Adv. Catal. 45, 71 (2000): an adsorbate binds through the d band (centre, coupling) and
through the s electrons, for which the atomic radius, the cohesive energy and the work function
stand in.
"""

from functools import cache

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from features.errors import FormulaError, UnknownMaterialError, explain
from features.formula import parse_formula
from features.tables import read_table

__all__ = [
    "METAL_DESCRIPTORS",
    "alloy_parts",
    "metal_descriptors",
    "site_d_band_centre_eV",
    "standardised_descriptors",
]

METAL_DESCRIPTORS = (
    "group",
    "d_band_centre_eV",
    "log10_coupling",
    "atomic_radius_nm",
    "work_function_eV",
    "cohesive_energy_eV",
    "electronegativity",
    "sp_character",
)
"""Columns of `metal_descriptors`."""

_NO_D_BAND_EV = -9.0
"""Stand-in centre of a d shell that takes no part in bonding (group 12 and beyond)."""

_CLOSE_PACKED_COORDINATION = 9.0


@cache
def _descriptors() -> pd.DataFrame:
    table = read_table("metals").set_index("element")
    without = table["group"] >= 12
    centre = table["d_band_centre_Ruban_eV"].fillna(table["d_band_centre_PBE_eV"])
    coupling = table["Vad2_rel_Cu"].astype(float)
    work_function = table["work_function_poly_eV"].astype(float)
    frame = pd.DataFrame(
        {
            "group": table["group"].astype(float),
            "d_band_centre_eV": centre.mask(without, _NO_D_BAND_EV),
            "log10_coupling": np.log10(coupling.fillna(coupling.min())),
            "atomic_radius_nm": 0.1 * np.cbrt(3.0 * table["atomic_volume_A3"] / (4.0 * np.pi)),
            "work_function_eV": work_function.fillna(work_function.median()),
            "cohesive_energy_eV": table["cohesive_energy_eV"].astype(float),
            "electronegativity": table["electronegativity_pauling"].astype(float),
            "sp_character": (table["group"] >= 13).astype(float) + 0.5 * (table["group"] == 12),
        }
    )
    complete = frame.loc[frame.notna().all(axis=1), list(METAL_DESCRIPTORS)]
    return complete.astype(np.float64).sort_index()


def metal_descriptors() -> pd.DataFrame:
    """Return the descriptors of every metal of the table, one row a symbol.

    Returns
    -------
    pandas.DataFrame
        Index: symbols. Columns: `METAL_DESCRIPTORS`. Metals without a d band in bonding carry a
        deep stand-in centre and the smallest coupling of the table; a missing work function is
        the median of the table.

    Examples
    --------
    >>> float(metal_descriptors().loc["Pt", "group"])
    10.0
    """
    return _descriptors().copy()


def standardised_descriptors() -> pd.DataFrame:
    """Return `metal_descriptors` with zero mean and unit deviation over the metals."""
    frame = _descriptors()
    return (frame - frame.mean()) / frame.std(ddof=0)


def alloy_parts(material: str) -> tuple[str, str, float]:
    """Read a metal or a binary alloy.

    Parameters
    ----------
    material : str
        Formula such as ``Pt``, ``Pt3Ni`` or ``AgAu``.

    Returns
    -------
    first, second : str
        Metals, the more abundant first; equal for a pure metal.
    share : float
        Share of the first metal, 0.5 to 1.

    Raises
    ------
    FormulaError
        If the formula cannot be read or has more than two elements.
    UnknownMaterialError
        If an element is no metal of the table.

    Examples
    --------
    >>> alloy_parts("Pt3Ni")
    ('Pt', 'Ni', 0.75)
    """
    shares = parse_formula(material).fractions
    if len(shares) > 2:
        raise FormulaError(
            explain(
                "too many elements",
                where=f"material {material!r}",
                expected="a metal or a binary alloy",
                found=", ".join(shares),
            )
        )
    known = _descriptors().index
    unknown = sorted(set(shares) - set(known))
    if unknown:
        raise UnknownMaterialError(
            explain(
                "no surface data for this element",
                where=f"material {material!r}",
                expected=f"one of {', '.join(known)}",
                found=", ".join(unknown),
            )
        )
    ordered = sorted(shares, key=lambda symbol: (-shares[symbol], symbol))
    return ordered[0], ordered[-1], float(shares[ordered[0]])


def site_d_band_centre_eV(
    centre_eV: NDArray[np.float64] | float, coordination: NDArray[np.float64] | float
) -> NDArray[np.float64]:
    """Shift a d-band centre to a site of another coordination by the second-moment rule.

    The band's width goes with the square root of the coordination; at constant filling the centre
    moves with the width: centre times sqrt(coordination / 9). Hammer and Norskov, Adv. Catal. 45,
    71 (2000). A rule for metals with a partly filled d band; it overstates shifts of full bands.

    Parameters
    ----------
    centre_eV : float or ndarray
        Centre on the close-packed face, against the Fermi level.
    coordination : float or ndarray
        Coordination number of the site, 1 to 12.

    Returns
    -------
    ndarray

    Examples
    --------
    >>> float(site_d_band_centre_eV(-2.25, 9.0))
    -2.25
    >>> bool(site_d_band_centre_eV(-2.25, 6.0) > -2.25)
    True
    """
    share = np.asarray(coordination, dtype=np.float64) / _CLOSE_PACKED_COORDINATION
    return np.asarray(centre_eV, dtype=np.float64) * np.sqrt(share)
