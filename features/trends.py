"""Trends of masses and dielectric constants with the gap: physics means for unmeasured compounds.

Energies in eV, masses over the free electron mass. Electron mass: k.p expression of Kane, J. Phys.
Chem. Solids 1, 249 (1957), in the notation of Vurgaftman, Meyer, Ram-Mohan, J. Appl. Phys. 89,
5815 (2001). Refractive index: Moss, Phys. Status Solidi B 131, 415 (1985); Ravindra, Auluck,
Srivastava, Phys. Status Solidi B 93, K155 (1979); Herve and Vandamme, Infrared Phys. Technol. 35,
609 (1994). Polarisability of an average gap: Penn, Phys. Rev. 128, 2093 (1962).
"""

from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from features.errors import PhysicsRangeError, explain

__all__ = [
    "electron_mass_from_gap",
    "kane_electron_mass",
    "optical_dielectric_from_gap",
    "penn_dielectric",
]

FloatArray = NDArray[np.float64]
Rule = Literal["herve-vandamme", "moss", "ravindra"]

_MOSS_EV = 95.0
_HERVE_A_EV, _HERVE_B_EV = 13.6, 3.4
_RAVINDRA = (4.084, 0.62)
_RAVINDRA_WIDEST_EV = 4.5
# Squared plasma energy of one electron in a nm^3: (e hbar)^2 / (eps0 m0).
_PLASMA_EV2_NM3 = 1.3788
_TYPICAL_KANE_EV = 20.0


def _positive(name: str, values: Any, *, unit: str = "eV") -> FloatArray:
    array = np.asarray(values, dtype=np.float64)
    if not np.all(array > 0.0):
        raise PhysicsRangeError(
            explain(f"{name} out of range", expected=f"above 0 {unit}", found=f"{array.min()}")
        )
    return array


def kane_electron_mass(
    gap_eV: float, kane_energy_eV: float, spin_orbit_eV: float = 0.0, remote: float = 0.0
) -> float:
    """Return the k.p electron mass at the Gamma point.

    Parameters
    ----------
    gap_eV : float
        Direct gap, above 0.
    kane_energy_eV : float
        Kane energy E_P; 15 to 31 eV in tetrahedral semiconductors.
    spin_orbit_eV : float, default 0.0
        Spin-orbit splitting of the valence band.
    remote : float, default 0.0
        Remote-band term F.

    Returns
    -------
    float
        1 / (1 + 2F + E_P (E_g + 2 D / 3) / (E_g (E_g + D))).

    Raises
    ------
    PhysicsRangeError
        If the gap or the Kane energy is not above 0.

    Examples
    --------
    >>> round(kane_electron_mass(1.519, 28.8, 0.341, -1.94), 3)
    0.067
    """
    _positive("gap", gap_eV)
    _positive("Kane energy", kane_energy_eV)
    mixed = (gap_eV + 2.0 * spin_orbit_eV / 3.0) / (gap_eV * (gap_eV + spin_orbit_eV))
    return 1.0 / (1.0 + 2.0 * remote + kane_energy_eV * mixed)


def electron_mass_from_gap(gap_eV: Any, kane_energy_eV: float = _TYPICAL_KANE_EV) -> FloatArray:
    """Return the two-band electron mass of a direct-gap semiconductor.

    Parameters
    ----------
    gap_eV : array-like
        Gap, above 0; the rule holds for direct gaps up to about 4 eV.
    kane_energy_eV : float, default 20.0
        Kane energy; 20 eV is the usual choice for an unknown compound.

    Returns
    -------
    ndarray
        E_g / (E_g + E_P), rising with the gap and below 1.

    Raises
    ------
    PhysicsRangeError
        If a gap or the Kane energy is not above 0.

    Examples
    --------
    >>> electron_mass_from_gap([0.4, 1.5]).round(3).tolist()
    [0.02, 0.07]
    """
    gap = _positive("gap", gap_eV)
    kane = _positive("Kane energy", kane_energy_eV)
    return np.asarray(gap / (gap + kane))


def optical_dielectric_from_gap(gap_eV: Any, rule: Rule = "herve-vandamme") -> FloatArray:
    """Return the high-frequency dielectric constant, the square of the refractive index.

    Parameters
    ----------
    gap_eV : array-like
        Gap, above 0; at most 4.5 eV for ``"ravindra"``. Lead salts lie far above all rules.
    rule : {"herve-vandamme", "moss", "ravindra"}, default "herve-vandamme"
        ``1 + (13.6 / (E_g + 3.4))**2``; ``sqrt(95 / E_g)``; ``(4.084 - 0.62 E_g)**2``.

    Returns
    -------
    ndarray

    Raises
    ------
    PhysicsRangeError
        If a gap is out of the rule's range.

    Examples
    --------
    >>> optical_dielectric_from_gap([1.42]).round(1).tolist()
    [9.0]
    """
    gap = _positive("gap", gap_eV)
    if rule == "moss":
        return np.asarray(np.sqrt(_MOSS_EV / gap))
    if rule == "ravindra":
        if np.any(gap > _RAVINDRA_WIDEST_EV):
            raise PhysicsRangeError(
                explain(
                    "gap out of range",
                    where="the rule of Ravindra",
                    expected=f"at most {_RAVINDRA_WIDEST_EV} eV",
                    found=f"{gap.max()}",
                    do="use the rule of Herve and Vandamme",
                )
            )
        return np.asarray((_RAVINDRA[0] - _RAVINDRA[1] * gap) ** 2)
    return np.asarray(1.0 + (_HERVE_A_EV / (gap + _HERVE_B_EV)) ** 2)


def penn_dielectric(average_gap_eV: Any, electrons_per_nm3: Any) -> FloatArray:
    """Return the dielectric constant of Penn's model semiconductor.

    Parameters
    ----------
    average_gap_eV : array-like
        Penn gap, an average over the zone and well above the lowest gap (4.8 eV in silicon).
    electrons_per_nm3 : array-like
        Valence electrons in one nm^3 (200 in silicon).

    Returns
    -------
    ndarray
        1 + (hbar w_p / E)^2, with the plasma energy of the valence electrons.

    Raises
    ------
    PhysicsRangeError
        If a value is not above 0.

    Examples
    --------
    >>> penn_dielectric([4.8], [200.0]).round(0).tolist()
    [13.0]
    """
    gap = _positive("average gap", average_gap_eV)
    density = _positive("electron density", electrons_per_nm3, unit="per nm^3")
    return np.asarray(1.0 + _PLASMA_EV2_NM3 * density / gap**2)
