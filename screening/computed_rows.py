"""Computed crystallites as rows of the emission model's second fidelity."""

from functools import cache

import pandas as pd

from features.computed_gaps import computed_gaps
from features.semiconductors import bulk_constants

__all__ = ["COMPUTED", "SMALLEST_COMPUTED_nm", "computed_rows"]

COMPUTED = "computed"
"""Source of a computed row."""
SMALLEST_COMPUTED_nm = 2.5
"""Below, the passivated surface rules the gap (docs/decisions/0005)."""
_NOISE_eV = 0.1


@cache
def _rows() -> pd.DataFrame:
    gaps = computed_gaps()
    gaps = gaps[gaps["diameter_nm"] >= SMALLEST_COMPUTED_nm].reset_index(drop=True)
    bulk = bulk_constants(gaps["material"].tolist()).drop(columns=["material", "source"])
    rows = gaps[["material", "diameter_nm", "optical_gap_eV"]].join(bulk)
    return rows.assign(source=COMPUTED, shape="sphere", noise_eV=_NOISE_eV, vote=1.0)


def computed_rows() -> pd.DataFrame:
    """Return the computed rows of all materials, in the columns of training rows.

    They depend on bulk constants and published tight-binding parameters only, so that a material
    whose measured rows are left out keeps its computed ones.

    Returns
    -------
    pandas.DataFrame
        ``noise_eV`` is 0.1 eV: about what separates computed from measured gaps between 3 and
        6 nm; what is common to all is learned as a term of its own.

    Examples
    --------
    >>> rows = computed_rows()
    >>> bool((rows["diameter_nm"] >= SMALLEST_COMPUTED_nm).all())
    True
    """
    return _rows().copy()
