"""Answers on adsorption energies as frames."""

import numpy as np
import pandas as pd

from screening.covariance import FloatArray

__all__ = ["NORMAL_90", "result_frame", "site_frame"]

NORMAL_90 = 1.6448536269514722
"""Half width of the central 90 % of a standard normal distribution."""


def result_frame(
    rows: pd.DataFrame,
    mean: FloatArray,
    sd: FloatArray,
    half: FloatArray,
    state: list[str],
    near: list[str],
) -> pd.DataFrame:
    """Return means, 90 % intervals and what stands behind them, one row a question."""
    return pd.DataFrame(
        {
            "adsorption_energy_eV": mean,
            "adsorption_energy_low_eV": mean - half,
            "adsorption_energy_high_eV": mean + half,
            "adsorption_energy_sd_eV": sd,
            "record_state": state,
            "nearest_source": near,
        },
        index=rows.index,
    )


def site_frame(
    terrace: pd.Series, shift: FloatArray, sd: FloatArray, index: pd.Index
) -> pd.DataFrame:
    """Return the sites of a particle: the terrace's energy moved, the errors in quadrature."""
    mean = float(terrace["adsorption_energy_eV"]) + shift
    common = float(terrace["adsorption_energy_sd_eV"])
    half = 0.5 * (terrace["adsorption_energy_high_eV"] - terrace["adsorption_energy_low_eV"])
    near = [str(terrace["nearest_source"])] * len(shift)
    state = [str(terrace["record_state"])] * len(shift)
    frame = result_frame(
        pd.DataFrame(index=index),
        mean,
        np.hypot(common, sd),
        np.hypot(float(half), NORMAL_90 * sd),
        state,
        near,
    )
    return frame.assign(terrace_sd_eV=common, site_sd_eV=sd)
