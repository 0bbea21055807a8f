"""What a candidate's uncertainty is made of, and what one more sample would do about it.

The parts are independent standard deviations in eV that add in quadrature: what the model has not
learned (bulk constants included), the scatter between samples that the records show, the lab's own
size control, and the correction from gap to emission. One more measured sample of the same
material and size narrows the first part only.
"""

import numpy as np
import pandas as pd

from screening.dots import SizeGapModel

__all__ = ["uncertainty_parts"]

_WORTH_IT = 0.1


def uncertainty_parts(
    model: SizeGapModel, described: pd.DataFrame, quantity: str = "emission"
) -> pd.DataFrame:
    """Split the standard deviation of candidates into parts that add in quadrature.

    Parameters
    ----------
    model : SizeGapModel
        The model that described them.
    described : pandas.DataFrame
        As from `screening.scores.describe`.
    quantity : {"emission", "optical_gap"}, default "emission"
        What is decided on; the correction belongs to the emission only.

    Returns
    -------
    pandas.DataFrame
        With the caller's index, all in eV and before calibration: model_part_sd_eV,
        data_scatter_sd_eV, size_control_sd_eV, correction_sd_eV, total_sd_eV,
        total_after_one_more_sample_sd_eV, and shrinks_with_one_more_sample: whether one measured
        sample of the pair, as noisy as the median record, takes a tenth or more off the total.

    Notes
    -----
    A latent variance v measured once with variance s^2 becomes v s^2 / (v + s^2); s holds the
    records' scatter and the median noise of the records.
    """
    scatter = model.scatter_sd_eV(described)
    learned = np.maximum(described["model_sd_eV"].to_numpy() ** 2 - scatter**2, 0.0)
    emits = quantity == "emission"
    correction = described["stokes_sd_eV"].to_numpy() if emits else np.zeros(len(described))
    size = described["size_sd_eV"].to_numpy()
    measured = scatter**2 + float(model.rows_["noise_eV"].median()) ** 2
    fixed = scatter**2 + size**2 + correction**2
    total = np.sqrt(learned + fixed)
    after = np.sqrt(learned * measured / (learned + measured) + fixed)
    return pd.DataFrame(
        {
            "model_part_sd_eV": np.sqrt(learned),
            "data_scatter_sd_eV": scatter,
            "size_control_sd_eV": size,
            "correction_sd_eV": correction,
            "total_sd_eV": total,
            "total_after_one_more_sample_sd_eV": after,
            "shrinks_with_one_more_sample": after <= (1.0 - _WORTH_IT) * total,
        },
        index=described.index,
    )
