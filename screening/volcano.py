"""What is asked of a site: a descriptor made of adsorption energies, its window, its volcano.

A descriptor is a weighted sum of adsorption energies, as free energies or against a metal where
the reaction is defined so. A named reaction's window is where its relative volcano activity is
within a factor of ten of the top. Energies in eV.
"""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from features.adsorption import Reaction, free_energy_correction, reaction, relative_volcano_log10
from features.errors import SpecificationError, UnknownMaterialError, explain
from screening.covariance import FloatArray

if TYPE_CHECKING:
    from screening.surface_target import SurfaceTarget

__all__ = ["SurfaceQuestion", "question_of"]

_WINDOW_DECADES = 1.0


@dataclass(frozen=True)
class SurfaceQuestion:
    """A descriptor of sites and what it should be.

    Parameters
    ----------
    adsorbates : tuple of str
    coefficients : tuple of float
        Of the adsorption energies in the descriptor.
    shift_eV : float
        Added to their sum, free-energy corrections included.
    relative_to : str
        Metal whose close-packed surface is the descriptor's zero; empty for an absolute one.
    window_eV : tuple of (float, float)
        Of the descriptor.
    shared_sd_eV : float
        How well shift and optimum are known: one error for all sites of all metals.
    is_step : bool
        Whether only step sites do the work.
    volcano : Reaction or None
        None for a plain window.
    """

    adsorbates: tuple[str, ...]
    coefficients: tuple[float, ...]
    shift_eV: float
    relative_to: str
    window_eV: tuple[float, float]
    shared_sd_eV: float
    is_step: bool
    volcano: Reaction | None

    @property
    def label(self) -> str:
        """Adsorbates as one text, such as ``C + O``."""
        return " + ".join(self.adsorbates)

    @property
    def correction_eV(self) -> float | None:
        """Free-energy correction of a single adsorbate, None where there is none on record."""
        if len(self.adsorbates) > 1:
            return None
        try:
            return free_energy_correction(self.adsorbates[0])[0]
        except UnknownMaterialError:
            return None

    def relative_activity_log10(self, descriptor_eV: FloatArray) -> FloatArray:
        """Return the decimal logarithm of the relative volcano activity of one site.

        Raises
        ------
        SpecificationError
            If no reaction was named.
        """
        if self.volcano is None:
            raise SpecificationError(
                explain("no volcano", where="target", expected="a reaction", do="name a reaction")
            )
        return relative_volcano_log10(descriptor_eV, self.volcano)


def question_of(target: "SurfaceTarget") -> SurfaceQuestion:
    """Return what a target asks.

    Parameters
    ----------
    target : SurfaceTarget

    Returns
    -------
    SurfaceQuestion

    Raises
    ------
    SpecificationError
        If the reaction is unknown, or a free energy has no correction on record.

    Examples
    --------
    >>> from screening.surface_target import SurfaceTarget
    >>> question = question_of(SurfaceTarget(reaction="hydrogen evolution"))
    >>> question.label, [round(end, 3) for end in question.window_eV]
    ('H', [-0.059, 0.059])
    """
    if target.reaction is not None:
        try:
            return _of_reaction(reaction(target.reaction))
        except SpecificationError as error:
            raise SpecificationError(f"target.reaction: {error}") from None
    adsorbate, window = str(target.adsorbate), target.window_eV or [0.0, 0.0]
    shift, sd = 0.0, 0.0
    if target.quantity == "adsorption_free_energy":
        try:
            shift, sd = free_energy_correction(adsorbate)
        except UnknownMaterialError as error:
            raise SpecificationError(f"target.adsorbate: {error}") from None
    return SurfaceQuestion(
        (adsorbate,), (1.0,), shift, "", (window[0], window[1]), sd, is_step=False, volcano=None
    )


def _of_reaction(volcano: Reaction) -> SurfaceQuestion:
    shift, variance = volcano.shift_eV, volcano.optimum_sd_eV**2
    if volcano.descriptor == "free energy" and not volcano.relative_to:
        for species, factor in zip(volcano.adsorbates, volcano.coefficients, strict=True):
            value, sd = free_energy_correction(species)
            shift, variance = shift + factor * value, variance + (factor * sd) ** 2
    return SurfaceQuestion(
        volcano.adsorbates,
        volcano.coefficients,
        shift,
        volcano.relative_to,
        volcano.window_eV(_WINDOW_DECADES),
        float(np.sqrt(variance)),
        volcano.surface == "step",
        volcano,
    )
