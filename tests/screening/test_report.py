import base64
import hashlib
import re
from html.parser import HTMLParser

import pandas as pd
import pytest

from features.tables import packaged_path, read_table
from screening.ranking import RankResult, rank
from screening.reporting.report import render_report
from screening.reporting.swatch import chromaticity, emission_colour
from screening.specification import parse_specification

SPEC = {
    "title": "Red emitter",
    "target": {"window_nm": [625, 635]},
    "candidates": {"diameter_nm": [2.0, 8.0], "step_nm": 0.25},
}


@pytest.fixture(scope="module")
def result(model):
    return rank(parse_specification(SPEC), model)


@pytest.fixture(scope="module")
def evidence():
    return pd.read_csv(packaged_path("datasets", "held_out_figures.csv"))


@pytest.fixture(scope="module")
def page(result, evidence):
    return render_report(result, {"warnings": []}, evidence)


class Tags(HTMLParser):
    def __init__(self):
        super().__init__()
        self.found = []

    def handle_starttag(self, tag, attrs):
        self.found.append((tag, dict(attrs)))


def tags(text):
    parser = Tags()
    parser.feed(text)
    return parser.found


def test_the_same_result_gives_the_same_bytes(result, evidence, page):
    assert render_report(result, {"warnings": []}, evidence) == page


def test_the_page_is_small_and_asks_nothing_of_the_network(page):
    assert len(page.encode()) < 1_500_000
    for tag, attributes in tags(page):
        for name in ("src", "href", "xlink:href", "action"):
            assert not attributes.get(name, "#").startswith(("http", "//")), (tag, attributes)
        assert "style" not in attributes, tag
        assert not any(name.startswith("on") for name in attributes), tag


def test_the_policy_allows_only_the_pages_own_style_and_script(page):
    policy = re.search(r'Content-Security-Policy" content="([^"]*)"', page)[1].replace("&#39;", "'")
    assert "default-src 'none'" in policy
    for element in ("style", "script"):
        text = re.search(rf"<{element}>(.*?)</{element}>", page, re.DOTALL)[1]
        digest = base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()
        assert f"{element}-src 'sha256-{digest}'" in policy


def test_the_structure_serves_readers_who_do_not_see_it(page):
    found = tags(page)
    names = [name for name, _ in found]
    assert next(a for n, a in found if n == "html")["lang"] == "en"
    assert names.count("h1") == 1
    assert names.count("table") == names.count("caption")
    assert all("scope" in a for n, a in found if n == "th")
    drawings = [a for n, a in found if n == "svg"]
    assert all("aria-labelledby" in a or "aria-label" in a for a in drawings)


def _luminance(colour):
    channels = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_text_contrast_is_at_least_four_and_a_half_in_light_and_dark(page):
    # Contrast ratio as defined by WCAG 2.1.
    themes = re.findall(r":root \{([^}]*)\}", page)
    assert len(themes) == 2
    for theme in themes:
        colours = dict(re.findall(r"--([a-z-]+): (#[0-9a-f]{6})", theme))
        for ink, paper in (
            ("ink", "paper"),
            ("ink", "soft"),
            ("ink", "warn-paper"),
            ("warn", "warn-paper"),
        ):
            light, dark = sorted((_luminance(colours[ink]), _luminance(colours[paper])))[::-1]
            assert (light + 0.05) / (dark + 0.05) >= 4.5, (ink, paper)


def test_cautions_come_before_the_shortlist_and_defer(page):
    assert page.index("Cautions.") < page.index('id="shortlist"')
    assert "safety data sheet, local codes and licensed practice" in page


def test_without_evidence_the_page_says_so_and_invents_nothing(result, evidence):
    page = render_report(result, {"warnings": []}, evidence.head(0))
    assert "run <code>fewnm audit</code>" in page


@pytest.mark.parametrize(
    "name",
    [
        "<script>alert(1)</script>",
        "=cmd()",
        "\u202eevil",
        "x" * 10_000,
        r"$\\frac{$",
        '"><img src=x onerror=y>',
    ],
)
def test_a_hostile_name_does_no_harm(result, evidence, name):
    def renamed(frame):
        return frame.replace({"material": {"CdSe": name}})

    hostile = RankResult(
        result.specification.model_copy(update={"title": name}),
        renamed(result.shortlist),
        renamed(result.scored),
        renamed(result.rejected),
        result.model,
    )
    page = render_report(hostile, {"warnings": [name]}, evidence)
    found = [tag for tag, _ in tags(page)]
    assert found.count("script") == 1
    assert "img" not in found
    assert len(page.encode()) < 1_500_000


@pytest.mark.parametrize(
    ("wavelength_nm", "x", "y"),
    # CIE 1931 spectrum locus, from memory of the standard's table.
    [(460, 0.144, 0.030), (520, 0.074, 0.834), (580, 0.512, 0.487), (620, 0.691, 0.308)],
)
def test_chromaticities_follow_the_cie_1931_locus(wavelength_nm, x, y):
    # The analytic functions are within a few hundredths of the table.
    assert chromaticity(wavelength_nm) == pytest.approx((x, y), abs=0.03)


def test_colours_outside_the_visible_are_not_invented():
    assert emission_colour(0.9, 0.1) == ""
    assert emission_colour(3.6, 0.1) == ""
    red, green, blue = (int(emission_colour(1.97, 0.08)[i : i + 2], 16) for i in (1, 3, 5))
    assert red > green
    assert red > blue


def test_no_two_elements_share_an_identifier(page):
    names = [a["id"] for _, a in tags(page) if "id" in a]
    assert len(names) == len(set(names))


def test_a_source_says_how_many_of_its_figures_were_recalled(page, result):
    rows = result.model.rows_
    bulk = read_table("bulk_semiconductors")
    listed = set(result.shortlist["material"])
    handbook = bulk[bulk["source"].eq("handbook") & bulk["material"].isin(listed)]
    assert handbook["from_memory"].all()
    assert rows["from_memory"].any()
    assert f"{len(handbook)} of {len(handbook)} figures recalled" in page


def test_direction_marks_do_not_reach_the_page(result, evidence):
    named = RankResult(
        result.specification,
        result.shortlist.replace({"material": {"CdSe": "Cd\u202eSe"}}),
        result.scored.replace({"material": {"CdSe": "Cd\u202eSe"}}),
        result.rejected,
        result.model,
    )
    assert "\u202e" not in render_report(named, {"warnings": []}, evidence)
