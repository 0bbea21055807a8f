import numpy as np
import pandas as pd
import pytest

from screening.adsorption_pure import PureSurfaceModel, pure_rows
from screening.audit_warnings import (
    adsorption_warnings,
    blend_warnings,
    emission_warnings,
    length_warnings,
    offset_warnings,
)
from screening.covariance import CovarianceTerm
from screening.dots import SizeGapModel
from screening.gaussian import GroupedGaussianProcess


def process(length):
    terms = (CovarianceTerm("x", (0,), length_scale=1.0, length_spread=0.5),)
    start = [0.0, np.log(length), np.log(0.1)]
    X = np.linspace(0.0, 1.0, 6)[:, None]
    return GroupedGaussianProcess(terms, start=start, max_iter=0).fit(X, X[:, 0])


@pytest.mark.parametrize(
    ("length", "named"), [(1.0, False), (2.6, False), (2.8, True), (0.3, True)]
)
def test_a_length_scale_two_deviations_off_its_prior_is_named(length, named):
    # exp(2 x 0.5) = 2.72 is the edge
    assert bool(length_warnings(process(length), "here")) is named


@pytest.mark.parametrize(("weight", "winner"), [(0.0, "the trees took"), (1.0, "process took")])
def test_a_blend_that_is_no_blend_is_named(weight, winner):
    assert winner in blend_warnings(weight, "here")[0]
    assert blend_warnings(0.5, "here") == []


def test_a_source_half_an_electronvolt_off_is_named():
    offsets = pd.DataFrame({"source": ["a", "b"], "what": "O", "offset_eV": [0.49, -0.51]})
    (said,) = offset_warnings(offsets, "here")
    assert "source b" in said


def test_a_shifted_source_of_sizes_is_named_with_its_material(rows):
    kept = rows[rows["material"].isin(["InP", "PbS", "CdTe", "CsPbBr3", "GaP", "ZnS", "Ge"])]
    extra = ["SnTe", "PbTe", "Ag2S", "CuInS2", "HgTe"]
    kept = rows[rows["material"].isin([*kept["material"], *extra])].reset_index(drop=True)
    source = kept.loc[kept["material"].eq("CsPbBr3"), "source"].iloc[0]
    shifted = kept["source"].eq(source) & kept["material"].eq("CsPbBr3")
    spoilt = kept.assign(optical_gap_eV=kept["optical_gap_eV"] + 3.0 * shifted)
    said = emission_warnings(SizeGapModel(n_folds=3).fit(spoilt).calibrate())
    assert any(f"source {source}" in line and "CsPbBr3" in line for line in said)


def test_offsets_of_adsorption_sources_are_looked_at():
    rows = pure_rows()
    other = rows["source"].value_counts().index[1]
    shifted = rows.assign(energy_eV=rows["energy_eV"] + 2.0 * rows["source"].eq(other))
    said = adsorption_warnings(PureSurfaceModel().fit(shifted, max_iter=0))
    assert any(f"source {other}" in line for line in said)
