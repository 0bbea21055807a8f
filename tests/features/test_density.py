from math import isnan

import pytest

from features.density import crystal_density_g_cm3

# Handbook densities at room temperature, g/cm3 (CRC Handbook, from memory).
HANDBOOK = {"CdSe": 5.81, "ZnS": 4.09, "PbS": 7.60, "InP": 4.81, "Si": 2.33, "CsPbBr3": 4.83}


@pytest.mark.parametrize("material", HANDBOOK)
def test_density_from_the_lattice_is_the_handbook_density(material):
    assert crystal_density_g_cm3(material) == pytest.approx(HANDBOOK[material], rel=0.03)


def test_no_density_is_made_up_for_other_structures_and_unknown_compounds():
    assert isnan(crystal_density_g_cm3("Cu2S"))
    assert isnan(crystal_density_g_cm3("NaCl"))
