"""What a trained model gives away about itself that a reader of its figures should know.

A covariance parameter driven to the edge of its prior, a blend that is no blend, and sources that
disagree with the rest by more than half an electronvolt.
"""

import numpy as np
import pandas as pd

from screening.adsorption_pure import PureSurfaceModel
from screening.dots import SizeGapModel
from screening.gaussian import GroupedGaussianProcess

__all__ = [
    "adsorption_warnings",
    "blend_warnings",
    "emission_warnings",
    "length_warnings",
    "offset_warnings",
]

_LARGEST_OFFSET_EV = 0.5
_EDGE_SDS = 2.0


def length_warnings(process: GroupedGaussianProcess, where: str) -> list[str]:
    """Name length scales more than two standard deviations of their prior from its centre.

    The parameters have log-normal priors instead of bounds, so that this is their edge.

    Parameters
    ----------
    process : GroupedGaussianProcess
        Fitted.
    where : str
        What the process learned; begins each sentence.
    """
    found = []
    fitted = process.term_parameters()
    for term in process.terms_:
        for length in fitted[term.name].lengths:
            away = np.log(length / term.length_scale) / term.length_spread
            if abs(away) > _EDGE_SDS:
                found.append(
                    f"{where}: a length scale of the term {term.name!r} is {length:.3g}, "
                    f"{abs(away):.1f} standard deviations from the centre of its prior"
                )
    return found


def blend_warnings(weight: float, where: str) -> list[str]:
    """Say that one half of a blend took all the weight.

    Parameters
    ----------
    weight : float
        Weight of the Gaussian process, 0 to 1.
    where : str
    """
    if 0.0 < weight < 1.0:
        return []
    winner, loser = ("Gaussian process", "trees")[:: 1 if weight >= 1.0 else -1]
    return [f"{where}: the {winner} took all the weight of the blend, the {loser} none"]


def offset_warnings(offsets: pd.DataFrame, where: str) -> list[str]:
    """Name sources that lie more than 0.5 eV off.

    Parameters
    ----------
    offsets : pandas.DataFrame
        Columns source, what and offset_eV.
    where : str
    """
    far = offsets[offsets["offset_eV"].abs() > _LARGEST_OFFSET_EV]
    return [
        f"{where}: source {row.source} lies {row.offset_eV:+.2f} eV off the rest ({row.what})"
        for row in far.itertuples()
    ]


def emission_warnings(model: SizeGapModel) -> list[str]:
    """Return what the emission track's model gives away about itself.

    Parameters
    ----------
    model : SizeGapModel
        Fitted and calibrated.

    Returns
    -------
    list of str
        Empty if there is nothing to say. The offset of a source is the mean difference of its
        records from the prediction that leaves their material out, less that of the material.
    """
    found = []
    for name, state in model.states_.items():
        found += length_warnings(model.regressor(name).gaussian_, f"emission, {name}")
        found += blend_warnings(state.gaussian_weight, f"emission, {name}")
    left = model.left_out_frame("new")
    off = left["optical_gap_eV"] - left["predicted_gap_eV"]
    own = off - off.groupby(left["material"]).transform("mean")
    offsets = own.groupby([left["source"], left["material"]]).mean().rename("offset_eV")
    named = offsets.reset_index().rename(columns={"material": "what"})
    return found + offset_warnings(named, "emission")


def adsorption_warnings(model: PureSurfaceModel) -> list[str]:
    """Return what the model of pure metal surfaces gives away about itself.

    Parameters
    ----------
    model : PureSurfaceModel
        Fitted.
    """
    offsets = model.source_offsets().rename(columns={"adsorbate": "what"})
    found = length_warnings(model.gaussian_, "adsorption on pure metals")
    return found + offset_warnings(offsets, "adsorption on pure metals")
