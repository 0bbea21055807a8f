"""Free energies of adsorption and reaction volcanoes.

Energies in eV against one common reference per adsorbate (table ``free_energy_corrections``);
negative binds. A volcano (Sabatier) gives a relative activity per site, never a rate: Norskov et
al., J. Electrochem. Soc. 152, J23 (2005) for its two legs.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.constants import Boltzmann, elementary_charge

from features.errors import SpecificationError, UnknownMaterialError, explain
from features.tables import read_table

__all__ = [
    "Reaction",
    "common_references",
    "free_energy_correction",
    "free_energy_eV",
    "reaction",
    "reaction_names",
    "relative_volcano_interval",
    "relative_volcano_log10",
]

FloatArray = NDArray[np.float64]

_BOLTZMANN_EV = Boltzmann / elementary_charge


@dataclass(frozen=True)
class Reaction:
    """Descriptor, optimum and legs of a reaction's volcano.

    Parameters
    ----------
    name, title : str
    adsorbates : tuple of str
        Species whose energies make the descriptor.
    coefficients : tuple of float
    shift_eV : float
        Constant added to the descriptor.
    descriptor : {"energy", "free energy"}
    relative_to : str
        Metal whose close-packed surface is the descriptor's zero; empty for an absolute one.
    optimum_eV, optimum_sd_eV : float
        Top of the volcano and how well it is known.
    strong_slope, weak_slope : float
        Loss of ln(rate) times kT per eV of too strong and of too weak binding.
    temperature_K : float
    surface : {"terrace", "step"}
        Which sites do the work.
    source : str
        Key into the table of sources.
    """

    name: str
    title: str
    adsorbates: tuple[str, ...]
    coefficients: tuple[float, ...]
    shift_eV: float
    descriptor: str
    relative_to: str
    optimum_eV: float
    optimum_sd_eV: float
    strong_slope: float
    weak_slope: float
    temperature_K: float
    surface: str
    source: str

    def descriptor_eV(
        self,
        energies_eV: Mapping[str, FloatArray | float],
        reference_eV: Mapping[str, float] | None = None,
    ) -> FloatArray:
        """Return the descriptor from adsorption energies.

        Parameters
        ----------
        energies_eV : mapping of str to float or ndarray
            Adsorption energy of every species in `adsorbates`, common references.
        reference_eV : mapping of str to float or None, default None
            The same on the close-packed surface of `relative_to`, where that is set.

        Returns
        -------
        ndarray

        Raises
        ------
        SpecificationError
            If a species, or a reference that the reaction needs, is missing.
        """
        missing = [a for a in self.adsorbates if a not in energies_eV]
        if missing or (self.relative_to and reference_eV is None):
            raise SpecificationError(
                explain(
                    "descriptor incomplete",
                    where=f"reaction {self.name!r}",
                    expected=f"energies of {', '.join(self.adsorbates)}"
                    + (f" and the same on {self.relative_to}" if self.relative_to else ""),
                    found=f"energies of {', '.join(energies_eV) or 'none'}",
                )
            )
        total = np.asarray(self.shift_eV, dtype=np.float64)
        for species, factor in zip(self.adsorbates, self.coefficients, strict=True):
            value = np.asarray(energies_eV[species], dtype=np.float64)
            if self.relative_to and reference_eV is not None:
                value = value - reference_eV[species]
            elif self.descriptor == "free energy":
                value = free_energy_eV(value, species)
            total = total + factor * value
        return total

    def window_eV(self, decades: float = 1.0) -> tuple[float, float]:
        """Return where the relative volcano activity is within some decades of the top.

        Parameters
        ----------
        decades : float, default 1.0

        Returns
        -------
        (low, high) : tuple of float
            Of the descriptor.
        """
        loss = decades * _BOLTZMANN_EV * self.temperature_K * np.log(10.0)
        return (
            float(self.optimum_eV - loss / self.strong_slope),
            float(self.optimum_eV + loss / self.weak_slope),
        )


@cache
def _corrections() -> pd.DataFrame:
    return read_table("free_energy_corrections").set_index("adsorbate")


def common_references() -> dict[str, str]:
    """Return the common reference of every adsorbate that has a free-energy correction.

    Examples
    --------
    >>> common_references()["OH"]
    'H2O-0.5H2'
    """
    return {str(a): str(r) for a, r in _corrections()["reference_state"].items()}


def free_energy_correction(adsorbate: str) -> tuple[float, float]:
    """Return what turns an adsorption energy into a free energy at 298 K and 1 bar.

    Parameters
    ----------
    adsorbate : str

    Returns
    -------
    (correction_eV, correction_sd_eV) : tuple of float

    Raises
    ------
    UnknownMaterialError
        If no correction is tabulated for the adsorbate.

    Examples
    --------
    >>> free_energy_correction("H")
    (0.24, 0.05)
    """
    table = _corrections()
    if adsorbate not in table.index:
        raise UnknownMaterialError(
            explain(
                "no free-energy correction",
                where=f"adsorbate {adsorbate!r}",
                expected=f"one of {', '.join(table.index)}",
            )
        )
    return (
        float(table["correction_eV"].loc[adsorbate]),
        float(table["correction_sd_eV"].loc[adsorbate]),
    )


def free_energy_eV(energy_eV: Any, adsorbate: str) -> FloatArray:
    """Return the adsorption free energy at 298 K and 1 bar.

    Parameters
    ----------
    energy_eV : float or array-like
        Adsorption energy against the common reference.
    adsorbate : str

    Returns
    -------
    ndarray

    Raises
    ------
    UnknownMaterialError
        If no correction is tabulated for the adsorbate.

    Examples
    --------
    >>> round(float(free_energy_eV(-0.33, "H")), 2)
    -0.09
    """
    return np.asarray(energy_eV, dtype=np.float64) + free_energy_correction(adsorbate)[0]


@cache
def _reactions() -> dict[str, Reaction]:
    return {str(row["reaction"]): _reaction(row) for _, row in read_table("reactions").iterrows()}


def _reaction(row: pd.Series) -> Reaction:
    return Reaction(
        name=str(row["reaction"]),
        title=str(row["title"]),
        adsorbates=tuple(str(row["adsorbates"]).split(";")),
        coefficients=tuple(float(c) for c in str(row["coefficients"]).split(";")),
        shift_eV=float(row["shift_eV"]),
        descriptor=str(row["descriptor"]),
        relative_to="" if pd.isna(row["relative_to"]) else str(row["relative_to"]),
        optimum_eV=float(row["optimum_eV"]),
        optimum_sd_eV=float(row["optimum_sd_eV"]),
        strong_slope=float(row["strong_slope"]),
        weak_slope=float(row["weak_slope"]),
        temperature_K=float(row["temperature_K"]),
        surface=str(row["surface"]),
        source=str(row["source"]),
    )


def reaction_names() -> list[str]:
    """Return the names of the reactions whose volcano is tabulated."""
    return list(_reactions())


def reaction(name: str) -> Reaction:
    """Return the volcano of a reaction.

    Parameters
    ----------
    name : str
        One of `reaction_names`, in any case.

    Returns
    -------
    Reaction

    Raises
    ------
    SpecificationError
        If the reaction is not tabulated.

    Examples
    --------
    >>> reaction("hydrogen evolution").adsorbates
    ('H',)
    """
    by_case = {known.casefold(): value for known, value in _reactions().items()}
    found = by_case.get(name.strip().casefold())
    if found is None:
        raise SpecificationError(
            explain(
                "unknown reaction", expected=f"one of {', '.join(_reactions())}", found=repr(name)
            )
        )
    return found


def relative_volcano_log10(
    descriptor_eV: Any, volcano: Reaction, temperature_K: float | None = None
) -> FloatArray:
    """Return the decimal logarithm of the relative activity per site on a volcano.

    Zero at the top; minus slope times distance over kT ln 10 on either leg. A relative (Sabatier)
    activity: coverage, kinetics beyond the descriptor and transport are left out.

    Parameters
    ----------
    descriptor_eV : float or array-like
        From `Reaction.descriptor_eV`.
    volcano : Reaction
    temperature_K : float or None, default None
        None takes the volcano's own.

    Returns
    -------
    ndarray

    Examples
    --------
    >>> her = reaction("hydrogen evolution")
    >>> float(relative_volcano_log10(0.0, her))
    0.0
    >>> round(float(relative_volcano_log10(0.1, her)), 1)
    -1.7
    """
    kelvin = volcano.temperature_K if temperature_K is None else temperature_K
    distance = np.asarray(descriptor_eV, dtype=np.float64) - volcano.optimum_eV
    slope = np.where(distance < 0.0, volcano.strong_slope, volcano.weak_slope)
    loss = slope * np.abs(distance) / (_BOLTZMANN_EV * kelvin * np.log(10.0))
    return np.asarray(0.0 - loss, dtype=np.float64)


def relative_volcano_interval(
    low_eV: Any, high_eV: Any, volcano: Reaction, temperature_K: float | None = None
) -> tuple[FloatArray, FloatArray]:
    """Return the range of the relative volcano activity (log10) over a descriptor's interval.

    Parameters
    ----------
    low_eV, high_eV : float or array-like
        Ends of the descriptor's interval.
    volcano : Reaction
    temperature_K : float or None, default None

    Returns
    -------
    low, high : ndarray
        The worse end, and the better end or zero where the interval holds the optimum.

    Examples
    --------
    >>> her = reaction("hydrogen evolution")
    >>> float(relative_volcano_interval(-0.1, 0.2, her)[1])
    0.0
    """
    ends = np.stack(
        [relative_volcano_log10(end, volcano, temperature_K) for end in (low_eV, high_eV)]
    )
    holds = (np.asarray(low_eV) <= volcano.optimum_eV) & (volcano.optimum_eV <= np.asarray(high_eV))
    return ends.min(axis=0), np.where(holds, 0.0, ends.max(axis=0))
