"""The report on metal particles: same skeleton, own parts, nothing promised too much."""

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.particle import nearest_particle
from features.particle_shapes import available_shapes
from features.tables import packaged_path
from screening.adsorption import adsorption_model
from screening.ranking import rank
from screening.reporting.particle_drawing import draw_particle
from screening.reporting.report import render_report
from screening.reporting.site_styles import SITE_STYLES
from screening.running import held_out_figures
from screening.specification import load_specification, parse_specification

WINDOW = {
    "title": "Oxygen on metals",
    "target": {"adsorbate": "O", "window_eV": [1.1, 1.5]},
    "candidates": {"materials": ["Pt", "Pd", "AgAu"], "diameter_nm": [2, 4], "step_nm": 0.5},
}
CATALYSTS = ["hydrogen-evolution", "oxygen-reduction", "ammonia"]


@pytest.fixture(scope="module")
def metals():
    return adsorption_model()


def page_of(specification, metals):
    return render_report(rank(specification, metals), {"warnings": []}, held_out_figures())


@pytest.fixture(scope="module")
def pages(metals):
    """One page a packaged specification, at few sizes to be quick."""
    found = {}
    for name in CATALYSTS:
        specification = load_specification(packaged_path("configs", f"{name}.toml"))
        coarse = specification.candidates.model_copy(update={"step_nm": 1.0})
        found[name] = page_of(specification.model_copy(update={"candidates": coarse}), metals)
    return found


@pytest.fixture(scope="module")
def window_page(metals):
    return page_of(parse_specification(WINDOW), metals)


@pytest.mark.parametrize("name", CATALYSTS)
def test_packaged_specifications_fill_every_part_of_the_page(name, pages):
    assert len(pages[name].encode()) < 1_500_000
    for heading in ("Shortlist", "Size", "Sites", "How sure", "Limits in plain words"):
        assert f"<h2>{heading}</h2>" in pages[name]


@pytest.mark.parametrize("name", CATALYSTS)
def test_activity_is_never_named_without_relative_and_volcano(name, pages):
    text = re.sub(r"<[^>]*>", " ", pages[name])
    said = re.findall(r"(\S+)\s+(\S+)\s+activity", text, re.IGNORECASE)
    assert said
    allowed = {("relative", "volcano"), ("a", "sabatier")}
    assert {(a.lower(), b.lower()) for a, b in said} <= allowed


def test_the_same_result_gives_the_same_bytes(metals, window_page):
    assert page_of(parse_specification(WINDOW), metals) == window_page


def test_a_window_promises_no_volcano(window_page):
    assert "volcano" not in window_page
    assert "chance that their best sites lie in the window" in window_page


def test_the_picture_of_a_particle_counts_its_atoms():
    ax = draw_particle("Pt", "truncated_octahedron", 2.5)
    counts = [int(t.get_text().rsplit(" ", 1)[1]) for t in ax.get_legend().get_texts()]
    assert sum(counts) == nearest_particle("Pt", "truncated_octahedron", 2.5).n_surface


@given(
    which=st.sampled_from(
        [
            (m, s)
            for m, k in (("Pt", "fcc"), ("Ru", "hcp"), ("Fe", "bcc"))
            for s in available_shapes(k)
        ]
    ),
    diameter=st.floats(1.2, 4.0),
)
def test_every_shape_can_be_drawn(which, diameter):
    assert draw_particle(*which, diameter).get_legend().get_texts()


def _lightness(colour):
    red, green, blue = (int(colour[i : i + 2], 16) / 255.0 for i in (1, 3, 5))
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue


def test_sites_on_a_particle_differ_in_lightness_or_mark():
    styles = [style for kind, style in SITE_STYLES.items() if kind != "step"]
    for i, one in enumerate(styles):
        for other in styles[i + 1 :]:
            assert one.mark != other.mark
            assert one.hatch != other.hatch
            assert abs(_lightness(one.fill) - _lightness(other.fill)) > 0.1


def test_recalled_figures_are_told(window_page):
    assert "recalled from memory" in window_page
