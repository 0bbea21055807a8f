"""What the computed crystallites are worth: beside measurements, and to the emission model.

``python -m screening.computed_dots_audit`` prints what the parameter sets make of the bulk, the
error of the computed gaps, nothing fitted, by material and size, and the cost of a crystallite
against its atoms; with the argument ``models`` also the nested left-out error by material with and
without the computed rows (some minutes).
"""

import sys
import time
from itertools import pairwise

import numpy as np
import pandas as pd

from features.bulk_bands import bulk_check
from features.computed_dots import compute_dot
from features.computed_gaps import computed_gaps
from features.size_gap import SIZE_BANDS_nm, size_band, training_rows
from screening.dots import NEW, SizeGapModel

__all__ = ["beside_measurements", "cost_of_atoms", "error_by_material"]

_COST_SET = "ZnSe sp3s*"
_COST_DIAMETERS_nm = (2.0, 3.0, 4.0, 5.0, 6.0)


def beside_measurements(rows: pd.DataFrame) -> pd.DataFrame:
    """Compare computed with measured gaps at the measured sizes, inside the computed range.

    Parameters
    ----------
    rows : pandas.DataFrame
        As from ``features.size_gap.training_rows``.

    Returns
    -------
    pandas.DataFrame
        The rows that a computed curve reaches, with ``computed_gap_eV`` (interpolated over
        1/diameter), ``error_eV`` (computed less measured) and ``size_range``.
    """
    parts = []
    computed = computed_gaps().sort_values("diameter_nm", ascending=False)
    for material, dots in computed.groupby("material"):
        own = rows[rows["material"].eq(material)]
        own = own[own["diameter_nm"].between(dots["diameter_nm"].min(), dots["diameter_nm"].max())]
        inverse = 1.0 / own["diameter_nm"]
        gap = np.interp(inverse, 1.0 / dots["diameter_nm"], dots["optical_gap_eV"])
        parts.append(own.assign(computed_gap_eV=gap))
    frame = pd.concat(parts)
    frame["error_eV"] = frame["computed_gap_eV"] - frame["optical_gap_eV"]
    edges = [0.0, *SIZE_BANDS_nm, np.inf]
    names = [f"{a:g}-{b:g} nm" for a, b in pairwise(edges)]
    frame["size_range"] = [names[band] for band in size_band(frame["diameter_nm"])]
    return frame


def _vote_mean(values: pd.Series, rows: pd.DataFrame, keys: list[str]) -> pd.Series:
    """Return the mean by group, votes as weights."""
    groups = [rows[key] for key in keys]
    total: pd.Series = (values * rows["vote"]).groupby(groups).sum()
    return total / rows["vote"].groupby(groups).sum()


def cost_of_atoms() -> pd.DataFrame:
    """Measure the time of zinc selenide crystallites.

    Returns
    -------
    pandas.DataFrame
        Columns atoms, largest_block, seconds.
    """
    rows = []
    for diameter in _COST_DIAMETERS_nm:
        start = time.perf_counter()
        dot = compute_dot(_COST_SET, diameter, "anion")
        seconds = time.perf_counter() - start
        kept = {name: dot[name] for name in ("diameter_nm", "atoms", "largest_block")}
        rows.append(kept | {"seconds": round(seconds, 2)})
    return pd.DataFrame(rows)


def error_by_material(rows: pd.DataFrame, *, computed: bool, seed: int = 0) -> pd.DataFrame:
    """Predict every material as *new*, everything learned from the others.

    Parameters
    ----------
    rows : pandas.DataFrame
        As from ``features.size_gap.training_rows``.
    computed : bool
        Whether the model reads the computed rows.
    seed : int, default 0

    Returns
    -------
    pandas.DataFrame
        Indexed by material: error_eV (mean absolute) and inside_90 (share in the 90 % interval),
        votes as weights.
    """
    frames = []
    for material in sorted(rows["material"].unique()):
        own = rows["material"].eq(material)
        model = SizeGapModel(seed, computed=computed).fit(rows[~own]).calibrate([NEW])
        test = rows[own]
        predicted = model.predict(test)
        predicted["model_sd_eV"] = np.hypot(predicted["model_sd_eV"], test["noise_eV"])
        low, high = model.interval(predicted)
        error = (predicted["optical_gap_eV"] - test["optical_gap_eV"]).abs()
        inside = test["optical_gap_eV"].between(
            pd.Series(low, test.index), pd.Series(high, test.index)
        )
        frames.append(test.assign(error_eV=error, inside_90=inside.astype(float)))
    table = pd.concat(frames)
    columns = {
        name: _vote_mean(table[name], table, ["material"]) for name in ("error_eV", "inside_90")
    }
    return pd.DataFrame(columns)


def _print_models(rows: pd.DataFrame) -> None:
    without = error_by_material(rows, computed=False)
    both = error_by_material(rows, computed=True)
    table = without.join(both, lsuffix=" without", rsuffix=" with")
    table["computed rows"] = table.index.isin(computed_gaps()["material"])
    _say(table.round(3).to_string())
    _say(table.drop(columns="computed rows").mean().round(4).to_string())


def _say(text: str) -> None:
    sys.stdout.write(text + "\n\n")


def main() -> None:
    """Print the tables."""
    rows = training_rows()
    _say(bulk_check().round(3).to_string())
    compared = beside_measurements(rows)
    mean = _vote_mean(compared["error_eV"], compared, ["material", "size_range"])
    table = mean.rename("eV").reset_index().pivot_table("eV", "material", "size_range", sort=False)
    _say("computed less measured, eV\n" + table.round(2).to_string(na_rep=""))
    size = _vote_mean(compared["error_eV"].abs(), compared, ["material"])
    _say("mean absolute error, eV\n" + size.round(3).to_string())
    _say(cost_of_atoms().to_string(index=False))
    if "models" in sys.argv[1:]:
        _print_models(rows)


if __name__ == "__main__":
    main()
