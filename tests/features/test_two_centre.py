import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from features.two_centre import orbital_rotation, spin_orbit_block, two_centre_blocks

ROOT3 = np.sqrt(3.0)
NAMES = ("ss", "ee", "se", "es", "sp", "ps", "ep", "pe", "sd", "ds", "ed", "de", "pp_sigma")
NAMES += ("pp_pi", "pd_sigma", "pd_pi", "dp_sigma", "dp_pi", "dd_sigma", "dd_pi", "dd_delta")
VALUES = dict(zip(NAMES, np.sin(np.arange(len(NAMES)) + 1.0), strict=True))


def slater_koster(u, v):
    # Slater and Koster, Phys. Rev. 94, 1498 (1954), table I (from memory): row and column among
    # s, x, y, z, xy, yz, zx, x2-y2, 3z2-r2 and the coupling along the direction (x, y, z).
    x, y, z = u
    axial = z**2 - (x**2 + y**2) / 2
    around = x**2 + y**2
    sigma, pi, delta = v["dd_sigma"], v["dd_pi"], v["dd_delta"]
    return {
        (0, 1): x * v["sp"],
        (1, 1): x**2 * v["pp_sigma"] + (1 - x**2) * v["pp_pi"],
        (1, 2): x * y * (v["pp_sigma"] - v["pp_pi"]),
        (0, 4): ROOT3 * x * y * v["sd"],
        (0, 7): ROOT3 / 2 * (x**2 - y**2) * v["sd"],
        (0, 8): axial * v["sd"],
        (1, 4): ROOT3 * x**2 * y * v["pd_sigma"] + y * (1 - 2 * x**2) * v["pd_pi"],
        (1, 5): x * y * z * (ROOT3 * v["pd_sigma"] - 2 * v["pd_pi"]),
        (1, 7): ROOT3 / 2 * x * (x**2 - y**2) * v["pd_sigma"] + x * (1 - x**2 + y**2) * v["pd_pi"],
        (3, 8): z * axial * v["pd_sigma"] + ROOT3 * z * around * v["pd_pi"],
        (4, 4): 3 * x**2 * y**2 * sigma
        + (around - 4 * x**2 * y**2) * pi
        + (z**2 + x**2 * y**2) * delta,
        (4, 5): 3 * x * y**2 * z * sigma + x * z * (1 - 4 * y**2) * pi + x * z * (y**2 - 1) * delta,
        (8, 8): axial**2 * sigma + 3 * z**2 * around * pi + 0.75 * around**2 * delta,
    }


def test_blocks_are_those_of_the_published_table():
    u = np.array([2.0, -3.0, 6.0]) / 7.0
    block = two_centre_blocks([u], VALUES)[0]
    for place, coupling in slater_koster(u, VALUES).items():
        assert block[place] == pytest.approx(coupling, abs=1e-14), place


@given(st.tuples(*[st.floats(-1, 1)] * 4).filter(lambda q: np.linalg.norm(q) > 0.1))
def test_a_turned_bond_has_the_turned_block(quaternion):
    rotation = Rotation.from_quat(quaternion).as_matrix()
    u = np.array([1.0, 2.0, 2.0]) / 3.0
    turned = orbital_rotation(rotation)
    expected = turned @ two_centre_blocks([u], VALUES)[0] @ turned.T
    found = two_centre_blocks([rotation @ u], VALUES)[0]
    np.testing.assert_allclose(found, expected, atol=1e-12)


def test_two_like_atoms_may_be_exchanged():
    like = {**VALUES, "se": VALUES["es"], "ps": VALUES["sp"], "pe": VALUES["ep"]}
    like |= {"ds": like["sd"], "de": like["ed"], "dp_sigma": like["pd_sigma"]}
    like |= {"dp_pi": like["pd_pi"]}
    u = np.array([2.0, 3.0, 6.0]) / 7.0
    there, back = two_centre_blocks([u, -u], like)
    np.testing.assert_allclose(there, back.T, atol=1e-14)


@given(st.tuples(*[st.floats(-1, 1)] * 4).filter(lambda q: np.linalg.norm(q) > 0.1))
def test_orbitals_turn_by_orthogonal_matrices(quaternion):
    turned = orbital_rotation(Rotation.from_quat(quaternion).as_matrix())
    np.testing.assert_allclose(turned @ turned.T, np.eye(10), atol=1e-12)


def test_spin_orbit_coupling_splits_p_into_four_and_two():
    levels = np.linalg.eigvalsh(spin_orbit_block(0.2))
    np.testing.assert_allclose(levels[:2], -0.4, atol=1e-12)
    np.testing.assert_allclose(levels[-4:], 0.2, atol=1e-12)
    np.testing.assert_allclose(levels[2:-4], 0.0, atol=1e-12)
