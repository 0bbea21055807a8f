import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.stats import norm

from features.emission import ensemble_fwhm_eV, integrated_fwhm_eV
from features.errors import PhysicsRangeError
from features.size_control import (
    fraction_inside,
    fraction_inside_integrated,
    measured_sizes,
    needed_size_spread,
    normal_sizes,
    room_for_share,
    spread_for_share,
)


@given(
    centre=st.floats(1.8, 2.2),
    sd=st.floats(0.02, 0.2),
    slope=st.floats(-1.5, -0.05),
    spread=st.floats(0.01, 0.12),
)
def test_closed_form_and_integration_over_normal_sizes_agree(centre, sd, slope, spread):
    closed = fraction_inside(1.9, 2.1, centre, np.hypot(sd, slope * spread))
    summed = fraction_inside_integrated((1.9, 2.1), [centre], [sd], [slope], normal_sizes(spread))
    assert summed[0] == pytest.approx(float(closed), abs=1e-5)


def test_the_share_in_the_window_equals_an_adaptive_integral():
    sizes, (low, high) = normal_sizes(0.08), (1.9, 2.1)
    found = fraction_inside_integrated((low, high), [1.97], [0.04], [-0.9], sizes)[0]

    def density(ratio):
        inside = norm.cdf((high - 1.97 + 0.9 * (ratio - 1)) / 0.04)
        inside -= norm.cdf((low - 1.97 + 0.9 * (ratio - 1)) / 0.04)
        return inside * norm.pdf(ratio, 1.0, 0.08)

    assert found == pytest.approx(quad(density, 0.4, 1.6)[0], abs=1e-6)


@given(half=st.floats(0.005, 0.5), sd=st.floats(0.001, 0.5), share=st.floats(0.05, 0.95))
def test_room_for_a_share_is_where_the_share_is_met(half, sd, share):
    room = float(room_for_share(half, sd, share))
    if np.isnan(room):
        assert norm.cdf(half / sd) - norm.cdf(-half / sd) < share
    else:
        met = norm.cdf((half - room) / sd) - norm.cdf((-half - room) / sd)
        assert met == pytest.approx(share, abs=1e-6)


@given(spread=st.floats(0.01, 0.3), slope=st.floats(-2.0, -0.05), single=st.floats(0.02, 0.1))
def test_the_spread_needed_gives_back_the_linewidth(spread, slope, single):
    width = ensemble_fwhm_eV(single, slope, spread)
    assert float(needed_size_spread(width, single, slope)) == pytest.approx(spread, rel=1e-5)


def test_the_spread_needed_agrees_with_integration_over_the_size_distribution():
    diameter_nm, slope_eV_per_nm, single_eV = 4.0, -0.25, 0.06
    spread = float(needed_size_spread(0.12, single_eV, slope_eV_per_nm * diameter_nm))
    width = integrated_fwhm_eV(
        lambda d: 3.0 + slope_eV_per_nm * d, diameter_nm, spread * diameter_nm, single_eV
    )
    assert width == pytest.approx(0.12, rel=1e-3)


def test_no_spread_meets_a_linewidth_below_that_of_one_particle():
    assert np.isnan(needed_size_spread(0.05, 0.06, -1.0))


@given(st.lists(st.floats(0.5, 20.0), min_size=2, max_size=30, unique=True), st.floats(0.1, 10.0))
def test_the_shape_of_measured_sizes_does_not_depend_on_the_unit(diameters, factor):
    first = measured_sizes(diameters)
    scaled = measured_sizes([factor * d for d in diameters])
    assert np.allclose(first.ratio, scaled.ratio)
    assert first.weight @ first.ratio == pytest.approx(1.0)


def test_counts_weigh_like_repeated_sizes():
    counted = measured_sizes([3.0, 4.0, 6.0], [1, 3, 2])
    repeated = measured_sizes([3.0, 4.0, 4.0, 4.0, 6.0, 6.0])
    assert counted.spread == pytest.approx(repeated.spread)


def test_many_normal_sizes_give_the_share_of_the_closed_form():
    drawn = np.random.default_rng(0).normal(4.0, 0.3, 20_000)
    shape = measured_sizes(drawn)
    found = fraction_inside_integrated((1.9, 2.1), [2.03], [0.05], [-0.8], shape)[0]
    sd = np.hypot(0.05, 0.8 * 0.3 / 4.0)
    assert found == pytest.approx(norm.cdf(0.07 / sd) - norm.cdf(-0.13 / sd), abs=0.01)


@pytest.mark.parametrize("spread", [0.0, -0.1, 0.6, np.nan])
def test_a_spread_out_of_range_is_refused(spread):
    with pytest.raises(PhysicsRangeError, match="size spread out of range"):
        normal_sizes(spread)


@pytest.mark.parametrize(
    ("diameters", "counts"), [([3.0, -1.0], None), ([3.0, 4.0], [1, -1]), ([3.0, np.nan], None)]
)
def test_sizes_that_cannot_be_are_refused(diameters, counts):
    with pytest.raises(PhysicsRangeError, match="sizes out of range"):
        measured_sizes(diameters, counts)


def test_one_size_is_no_distribution():
    with pytest.raises(PhysicsRangeError, match="too few sizes"):
        measured_sizes([4.0, 4.0])


@given(half=st.floats(0.005, 0.5), slope=st.floats(-2.0, -0.05), share=st.floats(0.05, 0.95))
def test_at_the_spread_for_a_share_a_centred_batch_just_holds_it(half, slope, share):
    spread = float(spread_for_share(half, slope, share))
    assert float(fraction_inside(-half, half, 0.0, abs(slope) * spread)) == pytest.approx(share)


@pytest.mark.parametrize("share", [0.0, 1.0, -1.0])
def test_a_share_out_of_range_is_refused(share):
    with pytest.raises(PhysicsRangeError, match="share out of range"):
        room_for_share(0.05, 0.02, share)


def test_many_sizes_gathered_in_bins_keep_mean_and_spread():
    drawn = np.random.default_rng(1).lognormal(1.4, 0.1, 5000)
    shape = measured_sizes(drawn)
    assert len(shape.ratio) <= 400
    assert shape.weight @ shape.ratio == pytest.approx(1.0)
    assert shape.spread == pytest.approx(drawn.std() / drawn.mean(), rel=1e-3)
