import numpy as np
import pandas as pd
import pytest
from sklearn.utils.estimator_checks import parametrize_with_checks

from features.confinement import sphere_confinement_eV
from features.confinement_features import ConfinementFeatures


# SkipTestWarning: scikit-learn announces the checks that need an optional array library.
@pytest.mark.filterwarnings("ignore::sklearn.exceptions.SkipTestWarning")
@parametrize_with_checks([ConfinementFeatures()])
def test_the_transformer_passes_scikit_learns_own_checks(estimator, check):
    check(estimator)


def test_names_units_and_the_callers_index_are_kept():
    frame = pd.DataFrame(
        [[3.0, 1.74, 0.13, 0.45, 6.2, 1.0]],
        columns=["diameter_nm", "gap_eV", "electron_mass_m0", "hole_mass_m0", "dielectric", "own"],
        index=["sample 7"],
    )
    out = ConfinementFeatures().fit_transform(frame)
    assert out.index.tolist() == ["sample 7"]
    assert out.columns[-1] == "own"
    assert list(out.columns) == list(ConfinementFeatures().fit(frame).get_feature_names_out())
    assert out["sphere_confinement_eV"].iloc[0] == pytest.approx(
        float(sphere_confinement_eV(3.0, 0.13 * 0.45 / 0.58))
    )


def test_rows_are_independent():
    rng = np.random.default_rng(1)
    X = np.abs(rng.normal(2.0, 0.5, size=(20, 5))) + 0.1
    transformer = ConfinementFeatures().fit(X)
    together = transformer.transform(X).to_numpy()
    alone = np.vstack([transformer.transform(X[i : i + 1]).to_numpy() for i in range(len(X))])
    np.testing.assert_allclose(together, alone, rtol=1e-12)
