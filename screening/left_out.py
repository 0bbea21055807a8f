"""One table of left-out predictions for both tracks, from which every audited figure follows.

One row a prediction: track, split, state of knowledge, what has one vote (``group``: a material,
metal, composition or element), what a bootstrap draws (``cluster``), observed and predicted
energy, ends of the central intervals (eV), and each baseline's prediction. Whoever recomputes a
figure needs nothing else.
"""

import itertools
from collections.abc import Mapping

import numpy as np
import pandas as pd

from features.size_gap import SIZE_BANDS_nm, size_band
from screening.adsorption_baselines import ALLOY_LADDER, METAL_BASELINES, PLAIN_LEARNERS
from screening.calibration import LEVELS, group_weights
from screening.covariance import FloatArray
from screening.dot_baselines import ABLATIONS, BASELINES
from screening.predictive import Predictive

__all__ = [
    "ADSORPTION",
    "BASELINE",
    "EMISSION",
    "LADDER",
    "adsorption_table",
    "baseline_names",
    "emission_table",
    "predictive_of",
    "segments",
    "size_class",
    "vote_weights",
]

EMISSION = "emission"
ADSORPTION = "adsorption"
BASELINE = "baseline: "
"""Start of the names of columns that hold a baseline's prediction."""
LADDER = "ladder: "
"""Start of the names of columns that hold a step of the ladder below the blended model."""

_ADSORPTION_BASELINES = (
    *METAL_BASELINES,
    *PLAIN_LEARNERS,
    "mixing rule of pure surfaces",
    "trees on composition averages",
)
_KEEP = ["record", "material", "family", "diameter_nm", "confidence", "vote"]
_KEEP += ["kernel_distance", "family_on_record", "reach"]


def size_class(diameter_nm: pd.Series) -> pd.Series:
    """Name the size range of each diameter, for instance ``2 to 3 nm``."""
    edges = [f"{edge:g}" for edge in SIZE_BANDS_nm]
    inner = [f"{low} to {high} nm" for low, high in itertools.pairwise(edges)]
    names = np.array([f"below {edges[0]} nm", *inner, f"{edges[-1]} nm and more"])
    return pd.Series(names[size_band(diameter_nm)], index=diameter_nm.index)


def emission_table(predictions: pd.DataFrame) -> pd.DataFrame:
    """Return the emission track's predictions as rows of the common table.

    Parameters
    ----------
    predictions : pandas.DataFrame
        As from `screening.dot_evaluation.evaluate_splits`.
    """
    frame = predictions[[*_KEEP, "split", "state"]].copy()
    frame["track"], frame["group"] = EMISSION, frame["material"]
    by_family = frame["split"].eq("families")
    frame["cluster"] = frame["family"].where(by_family, frame["material"])
    frame["size_class"] = size_class(frame["diameter_nm"])
    frame["observed_eV"] = predictions["optical_gap_eV"]
    frame["predicted_eV"] = predictions["predicted_gap_eV"]
    for level in LEVELS:
        for end in ("low", "high"):
            frame[f"{end}_{100 * level:.0f}_eV"] = predictions[f"{end}_{100 * level:.0f}"]
    for start, methods in ((BASELINE, BASELINES), (LADDER, ABLATIONS)):
        for name in methods:
            if name in predictions:
                frame[f"{start}{name}"] = predictions[name]
    return _scored(frame)


def adsorption_table(evaluation: Mapping[str, pd.DataFrame]) -> pd.DataFrame:
    """Return the catalysts' predictions as rows of the common table.

    Parameters
    ----------
    evaluation : mapping of str to pandas.DataFrame
        As from `screening.adsorption_audit.evaluate_adsorption`.
    """
    return pd.concat([_one_split(part, split) for split, part in evaluation.items()])


def _one_split(part: pd.DataFrame, split: str) -> pd.DataFrame:
    frame = part[["material", "group", "adsorbate"]].copy()
    frame["record"] = part["material"] + " " + part["adsorbate"]
    frame["track"], frame["split"], frame["state"] = ADSORPTION, split, "new"
    frame["cluster"], frame["vote"] = frame["group"], 1.0
    frame["observed_eV"], frame["predicted_eV"] = part["energy_eV"], part["model"]
    for level in LEVELS:
        for end in ("low", "high"):
            frame[f"{end}_{100 * level:.0f}_eV"] = part[f"{end}_{level:.0%}"]
    for start, names in ((BASELINE, _ADSORPTION_BASELINES), (LADDER, ALLOY_LADDER)):
        for name in names:
            if name in part:
                frame[f"{start}{name}"] = part[name]
    return _scored(frame)


def _scored(frame: pd.DataFrame) -> pd.DataFrame:
    """Add the probability integral transform and the ranked probability score of each row."""
    predictive, rows = predictive_of(frame)
    frame["pit"], frame["crps_eV"] = np.nan, np.nan
    observed = frame.loc[rows, "observed_eV"].to_numpy(dtype=float)
    frame.loc[rows, "pit"] = predictive.cdf(observed)
    frame.loc[rows, "crps_eV"] = predictive.crps(observed)
    return frame


def predictive_of(frame: pd.DataFrame) -> tuple[Predictive, pd.Series]:
    """Return the predictive distributions of rows, and which rows have one.

    A row has one if every level's interval exists; with too few groups for 90 % none does.
    """
    ends = [f"high_{100 * level:.0f}_eV" for level in LEVELS]
    rows = frame[ends].notna().all(axis=1)
    return Predictive.from_ends(frame[rows], LEVELS), rows


def baseline_names(frame: pd.DataFrame, start: str = BASELINE) -> list[str]:
    """Return the baselines that all rows of a segment have, without the start of the column."""
    columns = [c for c in map(str, frame.columns) if c.startswith(start)]
    return [c.removeprefix(start) for c in columns if frame[c].notna().all()]


def vote_weights(frame: pd.DataFrame) -> FloatArray:
    """Return row weights that sum to one, every group weighing the same."""
    weights = group_weights(frame["group"], frame["vote"])
    return np.asarray(weights / weights.sum(), dtype=np.float64)


def segments(
    table: pd.DataFrame, fewest_groups: int = 5
) -> list[tuple[tuple[str, str, str], pd.DataFrame]]:
    """Return track, split and state with their rows, where enough groups were judged."""
    keys = ["track", "split", "state"]
    found = [
        ((str(track), str(split), str(state)), part.dropna(axis=1, how="all"))
        for (track, split, state), part in table.groupby(keys, sort=False)
    ]
    return [(key, part) for key, part in found if part["group"].nunique() >= fewest_groups]
