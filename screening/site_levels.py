"""The descriptor on a metal's terrace or step, how it moves to other sites, and how sure that is.

Errors are of four kinds, and each is drawn once for all that it is common to: the error of the
metal's surface (all sites and sizes of the metal), of the slope with coordination (all sites and
sizes of the metal), of one kind of site, and of the volcano's top and the free-energy correction
(all metals). Energies in eV.
"""

import zlib
from dataclasses import dataclass
from functools import cached_property

import numpy as np
import pandas as pd
from scipy.special import ndtri

from features.adsorption_descriptors import alloy_parts
from screening.adsorption import LEVEL, AdsorptionModel
from screening.adsorption_questions import close_packed_structure
from screening.adsorption_sites import coordination_step, site_scatter_eV
from screening.covariance import FloatArray
from screening.volcano import SurfaceQuestion

__all__ = ["Draws", "SiteLevel", "site_level"]

_STEP_FACET = "211"


@dataclass(frozen=True)
class Draws:
    """Standard normal draws, the same for the same seed and name.

    Each set holds the quantiles of the normal distribution in an order of its own, so that no set
    is off centre by chance.

    Parameters
    ----------
    seed : int
    n_draws : int, default 400

    Examples
    --------
    >>> draws = Draws(0)
    >>> bool((draws.named("Pt") == draws.named("Pt")).all()), len(draws.named("Au"))
    (True, 400)
    """

    seed: int
    n_draws: int = 400

    @cached_property
    def _quantiles(self) -> FloatArray:
        return np.asarray(ndtri((np.arange(self.n_draws) + 0.5) / self.n_draws))

    def named(self, name: str) -> FloatArray:
        """Return the draws of a name, shape (n_draws,)."""
        rng = np.random.default_rng([self.seed, zlib.crc32(name.encode())])
        return np.asarray(rng.permutation(self._quantiles))


@dataclass(frozen=True)
class SiteLevel:
    """A question's descriptor on one metal.

    Attributes
    ----------
    material, structure : str
    energy_eV, energy_half_eV : float
        Adsorption energies of the surface, weighed and summed, and half their 90 % interval.
    descriptor_eV : float
        On the close-packed face, or on the step where steps do the work.
    error_eV, reference_error_eV : ndarray, shape (n_draws,)
        Draws of the error of the metal's surface, and of that which the descriptor is relative to.
    slope, slope_sd : float
        eV per unit of generalised coordination.
    scatter : float
        Sum of the coefficients' sizes: how often the scatter of single sites counts.
    record_state, nearest_source : str
    """

    material: str
    structure: str
    energy_eV: float
    energy_half_eV: float
    descriptor_eV: float
    error_eV: FloatArray
    reference_error_eV: FloatArray
    slope: float
    slope_sd: float
    scatter: float
    record_state: str
    nearest_source: str

    def shift_eV(self, generalised_coordination: FloatArray) -> tuple[FloatArray, ...]:
        """Return how far sites lie from the terrace: mean, by one sd of the slope, own sd.

        The second keeps its sign: one error of the slope moves sites on either side of the terrace
        apart.
        """
        step = coordination_step(generalised_coordination, self.structure)
        return (
            self.slope * step,
            self.slope_sd * step,
            self.scatter * site_scatter_eV(step),
        )


def _levels(
    model: AdsorptionModel, material: str, question: SurfaceQuestion, *, is_step: bool
) -> pd.DataFrame:
    """Return one row an adsorbate: energy, interval, state, nearest source."""
    frame = pd.DataFrame({"material": material, "adsorbate": list(question.adsorbates)})
    return model.predict_surfaces(frame.assign(facet=_STEP_FACET if is_step else ""))


def _error_eV(
    model: AdsorptionModel,
    rows: pd.DataFrame,
    question: SurfaceQuestion,
    normal: FloatArray,
) -> FloatArray:
    """Return draws of the weighed sum's error; adsorbates of one surface err together."""
    total = np.zeros(len(normal))
    for factor, adsorbate, (_, row) in zip(
        question.coefficients, question.adsorbates, rows.iterrows(), strict=True
    ):
        calibration = model.calibration(str(row["record_state"]), adsorbate)
        half = 0.5 * (row["adsorption_energy_high_eV"] - row["adsorption_energy_low_eV"])
        unit = float(half) / calibration.factor(LEVEL)
        total += abs(factor) * unit * calibration.model_score(normal)
    return total


def _reference(
    model: AdsorptionModel, question: SurfaceQuestion, draws: Draws
) -> tuple[float, FloatArray]:
    """Return the descriptor's zero and the draws of its error."""
    if not question.relative_to:
        return 0.0, np.zeros(draws.n_draws)
    rows = _levels(model, question.relative_to, question, is_step=False)
    zero = float(np.array(question.coefficients) @ rows["adsorption_energy_eV"].to_numpy())
    return zero, _error_eV(model, rows, question, draws.named(f"surface {question.relative_to}"))


def site_level(
    model: AdsorptionModel, material: str, question: SurfaceQuestion, draws: Draws
) -> SiteLevel:
    """Predict the descriptor on a metal or alloy.

    Parameters
    ----------
    model : AdsorptionModel
    material : str
    question : SurfaceQuestion
    draws : Draws
        The draws of a metal's surface are the same wherever it stands, so that a descriptor
        against a metal has no error on that metal itself.

    Returns
    -------
    SiteLevel
    """
    rows = _levels(model, material, question, is_step=question.is_step)
    factors = np.array(question.coefficients)
    size = np.abs(factors)
    half = 0.5 * (rows["adsorption_energy_high_eV"] - rows["adsorption_energy_low_eV"])
    energy = float(factors @ rows["adsorption_energy_eV"].to_numpy())
    zero, zero_error = _reference(model, question, draws)
    first, second, share = alloy_parts(material)
    parts = {first: 1.0} if first == second else {first: share, second: 1.0 - share}
    slopes = np.array([model.sites_.mean_slope(parts, a) for a in question.adsorbates])
    return SiteLevel(
        material,
        close_packed_structure(first),
        energy,
        float(size @ half.to_numpy()),
        energy - zero + question.shift_eV,
        _error_eV(model, rows, question, draws.named(f"surface {material}")),
        zero_error,
        float(factors @ slopes[:, 0]),
        float(size @ slopes[:, 1]),
        float(size.sum()),
        str(rows["record_state"].iloc[0]),
        "; ".join(dict.fromkeys(rows["nearest_source"].astype(str))),
    )
