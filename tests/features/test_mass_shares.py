import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.mass_shares import core_mass_share, core_shell_composition, mass_percent


@given(st.floats(1.0, 20.0), st.floats(0.0, 5.0))
def test_the_share_of_the_core_agrees_with_the_composition_of_the_whole(diameter, thickness):
    whole = core_shell_composition(
        {"Cd": 1, "Se": 1},
        {"Zn": 1, "S": 1},
        core_diameter_nm=diameter,
        shell_thickness_nm=thickness,
        core_density_g_cm3=5.8,
        shell_density_g_cm3=4.1,
    )
    shares = mass_percent(whole)
    share = float(core_mass_share([diameter], thickness, 5.8, 4.1)[0])
    assert shares["Cd"] + shares["Se"] == pytest.approx(100.0 * share)
