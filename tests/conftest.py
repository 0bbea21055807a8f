"""Fixtures that several test modules share; a trained model costs seconds, so it is made once."""

import pytest
from hypothesis import settings

from features.size_gap import training_rows
from screening.dots import SizeGapModel

# Machines differ in speed: a property is true or false, not fast or slow.
settings.register_profile("steady", deadline=None, derandomize=True)
settings.load_profile("steady")


@pytest.fixture(scope="session", autouse=True)
def _own_cache(tmp_path_factory):
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("FEWNM_CACHE", str(tmp_path_factory.mktemp("kept-models")))
        yield


@pytest.fixture(scope="session")
def rows():
    return training_rows()


@pytest.fixture(scope="session")
def model(rows):
    return SizeGapModel().fit(rows).calibrate()
