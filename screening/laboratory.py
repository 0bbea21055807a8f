"""A laboratory's results joined to the model: its size bias, what surprises, what changes.

Sizes of one laboratory may be off together, by method or by habit. The bias b, reported over true
diameter minus one, has a normal prior of 5 % (common practice: sizes by scattering and by
microscopy differ by about that) and is learned from all results at once: with fixed parameters the
marginal likelihood of the Gaussian process, tables and results together, is a function of b.
"""

from dataclasses import dataclass

import numpy as np
import pandas as pd
from scipy.special import ndtr
from scipy.stats import spearmanr

from features.size_gap import LARGEST_DIAMETER_nm, SMALLEST_DIAMETER_nm
from screening.covariance import FloatArray
from screening.dot_design import scale_of
from screening.dots import ON_RECORD, SizeGapModel
from screening.measurements import measured_rows

__all__ = ["LabUpdate", "SizeBias", "join_results", "size_bias"]

_PRIOR_SD = 0.05
_GRID = np.linspace(-0.16, 0.16, 25)
_IMPROBABLE = 0.05
_TELLING_SIGMAS = 2.0
_DRIFT_P = 0.01
_FEWEST_FOR_DRIFT = 6


@dataclass(frozen=True)
class SizeBias:
    """Reported over true diameter minus one, for one laboratory.

    Parameters
    ----------
    mean, sd : float
        Posterior mean and standard deviation.
    """

    mean: float
    sd: float

    @property
    def is_telling(self) -> bool:
        """Whether the bias differs from none by more than two standard deviations."""
        return abs(self.mean) > _TELLING_SIGMAS * self.sd


@dataclass(frozen=True)
class LabUpdate:
    """What results change.

    Parameters
    ----------
    model : SizeGapModel
        With the results, their sizes corrected for the bias.
    bias : SizeBias
    results : pandas.DataFrame
        One row a result: material, diameter_nm (as reported), corrected_diameter_nm,
        optical_gap_eV, predicted_gap_eV and predicted_sd_eV (before the results), p_value
        (calibrated, two-sided), is_improbable.
    findings : tuple of str
        What stands out, in words.
    """

    model: SizeGapModel
    bias: SizeBias
    results: pd.DataFrame
    findings: tuple[str, ...]


def _with_bias(rows: pd.DataFrame, bias: float) -> pd.DataFrame:
    true_nm = np.clip(rows["diameter_nm"] / (1.0 + bias), SMALLEST_DIAMETER_nm, LARGEST_DIAMETER_nm)
    return rows.assign(diameter_nm=true_nm)


def size_bias(model: SizeGapModel, rows: pd.DataFrame) -> SizeBias:
    """Estimate by how much a laboratory's sizes are off together.

    Parameters
    ----------
    model : SizeGapModel
        Fitted without the results.
    rows : pandas.DataFrame
        As from ``screening.measurements.measured_rows``.

    Returns
    -------
    SizeBias
        Moments of the posterior on a grid from -16 to 16 %.
    """
    log_density = np.array([_log_evidence(model, _with_bias(rows, bias)) for bias in _GRID])
    log_density -= 0.5 * (_GRID / _PRIOR_SD) ** 2
    weight = np.exp(log_density - log_density.max())
    weight /= weight.sum()
    mean = float(weight @ _GRID)
    return SizeBias(mean, float(np.sqrt(weight @ (_GRID - mean) ** 2)))


def _log_evidence(model: SizeGapModel, rows: pd.DataFrame) -> float:
    """Return the log density of the measured gaps, in eV, given the tables and the sizes."""
    joined = model.conditioned(rows)
    # The Gaussian process sees gaps over a scale that depends on the size.
    return joined.regressor(ON_RECORD).gaussian_.log_posterior_ - float(
        np.log(scale_of(rows)).sum()
    )


def join_results(model: SizeGapModel, measured: pd.DataFrame) -> LabUpdate:
    """Join results to the model and say what stands out.

    Parameters
    ----------
    model : SizeGapModel
        Fitted and calibrated, without the results.
    measured : pandas.DataFrame
        As from ``screening.measurements.read_measurements``.

    Returns
    -------
    LabUpdate
    """
    rows = measured_rows(measured)
    bias = size_bias(model, rows)
    corrected = _with_bias(rows, bias.mean)
    relative = np.hypot(rows["diameter_uncertainty_nm"] / rows["diameter_nm"], bias.sd)
    slope = _slope_share(rows)
    corrected["noise_eV"] = np.sqrt(rows["noise_eV"] ** 2 + (slope * bias.sd) ** 2)
    corrected["diameter_uncertainty_nm"] = relative * corrected["diameter_nm"]
    before = _judged(model, rows, corrected)
    dates = measured.get("date")
    return LabUpdate(model.conditioned(corrected), bias, before, _findings(before, bias, dates))


def _slope_share(rows: pd.DataFrame) -> FloatArray:
    """Return the change of the gap for a relative change of the diameter, eV, from the noise."""
    by_size = rows["noise_eV"] ** 2 - rows["energy_sd_eV"] ** 2
    relative = rows["diameter_uncertainty_nm"] / rows["diameter_nm"]
    return np.asarray(np.sqrt(np.maximum(by_size, 0.0)) / relative, dtype=np.float64)


def _judged(model: SizeGapModel, rows: pd.DataFrame, corrected: pd.DataFrame) -> pd.DataFrame:
    """Compare results with what the model held before them."""
    held = model.predict(rows)
    spread = np.hypot(held["model_sd_eV"], rows["noise_eV"])
    p_value = np.empty(len(rows))
    for name, state in model.states_.items():
        own = held["record_state"].to_numpy() == name
        z = (rows["optical_gap_eV"] - held["optical_gap_eV"]).to_numpy()[own] / spread[own]
        p_value[own] = 2.0 * ndtr(-np.abs(state.calibration.normal_score(z)))
    return pd.DataFrame(
        {
            "material": rows["material"],
            "diameter_nm": rows["diameter_nm"],
            "corrected_diameter_nm": corrected["diameter_nm"],
            "optical_gap_eV": rows["optical_gap_eV"],
            "predicted_gap_eV": held["optical_gap_eV"],
            "predicted_sd_eV": spread,
            "record_state": held["record_state"],
            "p_value": p_value,
            "is_improbable": p_value < _IMPROBABLE / max(len(rows), 1),
        }
    )


def _findings(results: pd.DataFrame, bias: SizeBias, dates: pd.Series | None) -> tuple[str, ...]:
    """Tell a biased laboratory, a drift and a model that is off apart, in words."""
    found = []
    if bias.is_telling:
        word = "large" if bias.mean > 0.0 else "small"
        found.append(
            f"the reported diameters look {abs(bias.mean):.1%} too {word} (+/- {bias.sd:.1%}); "
            "they were corrected for it"
        )
    off = results[results["is_improbable"]]
    for material, part in off.groupby("material", sort=True):
        found.append(
            f"{len(part)} of {int((results['material'] == material).sum())} results of {material} "
            f"were held for improbable (smallest p {part['p_value'].min():.1g})"
            + ("" if bias.is_telling else "; no common size bias explains it")
        )
    drift = _drift(results, dates)
    return (*found, drift) if drift else tuple(found)


def _drift(results: pd.DataFrame, dates: pd.Series | None) -> str:
    """Say whether the errors run with the date."""
    if dates is None:
        return ""
    known = dates.notna()
    if int(known.sum()) < _FEWEST_FOR_DRIFT or len(dates[known].drop_duplicates()) < 3:
        return ""
    error = (results["optical_gap_eV"] - results["predicted_gap_eV"]) / results["predicted_sd_eV"]
    order = pd.to_datetime(dates[known]).rank()
    trend = spearmanr(order, error[known])
    if trend.pvalue >= _DRIFT_P:
        return ""
    word = "rise" if trend.statistic > 0 else "fall"
    return f"the errors {word} with the date (rank correlation p {trend.pvalue:.1g}): a drift"
