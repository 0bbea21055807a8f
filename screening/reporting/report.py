"""One HTML file for a meeting: verdict, shortlist, map, how sure, cautions, sources, manifest."""

import base64
import hashlib
import json
import unicodedata
from collections.abc import Mapping
from importlib.resources import files
from typing import Any

import pandas as pd
from jinja2 import Environment
from markupsafe import Markup

from features.tables import read_table
from screening.ranking import RankResult
from screening.reporting.figures import (
    MOST_LINES,
    curve_numbers,
    draw_intervals,
    draw_map,
    figure_svg,
)
from screening.reporting.swatch import emission_colour

__all__ = ["render_report"]

_LONGEST_CELL = 400


def _part(name: str) -> str:
    return (files("screening.reporting") / name).read_text(encoding="utf-8")


def _content_hash(text: str) -> str:
    digest = hashlib.sha256(text.encode("utf-8")).digest()
    return f"sha256-{base64.b64encode(digest).decode('ascii')}"


def render_report(result: RankResult, manifest: Mapping[str, Any], evidence: pd.DataFrame) -> str:
    """Return the report of a run as one self-contained HTML page.

    Parameters
    ----------
    result : RankResult
    manifest : mapping
        As from `screening.outputs.build_manifest`.
    evidence : pandas.DataFrame
        Left-out figures as from `screening.running.held_out_figures`; may be empty.

    Returns
    -------
    str
        HTML with a content-security policy that allows no network and only its own style and
        script.
    """
    style, script = _part("style.css"), _part("script.js")
    environment = Environment(autoescape=True, trim_blocks=True, lstrip_blocks=True)
    environment.filters["short"] = _short
    page = environment.from_string(_part("report.html.j2"))
    return str(
        page.render(
            title=result.specification.title,
            verdict=_verdict(result),
            rows=_rows(result),
            window=_window_text(result),
            map_svg=Markup(_map_svg(result)),  # noqa: S704 - drawn here, names escaped
            map_caption=_map_caption(result),
            map_rows=curve_numbers(result).to_dict("records"),
            interval_svg=Markup(_interval_svg(result)),  # noqa: S704 - drawn here, names escaped
            interval_caption=_interval_caption(result),
            evidence=_evidence_rows(evidence),
            changes=_changes(result),
            rejected=result.rejected.to_dict("records"),
            sources=_sources(result),
            manifest=json.dumps(manifest, indent=2, ensure_ascii=False),
            warnings=manifest.get("warnings", []),
            style=Markup(style),  # noqa: S704 - a file of this package
            script=Markup(script),  # noqa: S704 - a file of this package
            style_hash=_content_hash(style),
            script_hash=_content_hash(script),
        )
    )


def _short(text: object) -> str:
    """Cut a cell and drop characters that only steer the direction or join of others."""
    cell = "".join(mark for mark in str(text) if unicodedata.category(mark) != "Cf")
    return cell if len(cell) <= _LONGEST_CELL else f"{cell[:_LONGEST_CELL]}…"


def _verdict(result: RankResult) -> str:
    listed = result.shortlist.head(3)
    names = ", ".join(
        f"{_short(m)} at {d:.2f} nm"
        for m, d in zip(listed["material"], listed["diameter_nm"], strict=True)
    )
    best = listed.iloc[0]
    reason = (
        f"{_short(best['material'])} has the highest chance of a batch inside the window "
        f"({best['chance_in_window']:.0%}); it is a material "
        + (
            "with size data on record."
            if best["record_state"] == "on record"
            else "never recorded small, so its interval comes from materials that were left out."
        )
    )
    count = {1: "this one", 2: "these two", 3: "these three"}[len(listed)]
    return (
        f"Make {count} first: {names}. {reason} The chance that at least one lands is "
        f"{result.chance_of_one():.0%}, if their errors are independent."
    )


def _window_text(result: RankResult) -> str:
    low, high = result.specification.target.energies_eV
    quantity = result.specification.target.quantity.replace("_", " ")
    return f"{quantity} from {low:.3f} to {high:.3f} eV"


def _rows(result: RankResult) -> list[dict[str, Any]]:
    rows = result.shortlist.to_dict("records")
    for row in rows:
        row["colour"] = emission_colour(row["emission_eV"], row["fwhm_meV"] / 1000.0)
    return [{str(name): value for name, value in row.items()} for row in rows]


def _map_svg(result: RankResult) -> str:
    return figure_svg(
        draw_map(result),
        "Property against core diameter",
        "Curves of the listed materials with 90 % bands, records as points, listed candidates as "
        "stars, and the window as a grey band.",
        "map",
    )


def _map_caption(result: RankResult) -> str:
    best = result.shortlist.iloc[0]
    return (
        f"{_short(best['material'])} crosses the window at {best['diameter_nm']:.2f} nm; "
        f"the diameter may drift by {best['size_tolerance_nm']:.2f} nm before the predicted "
        "centre leaves it. "
        f"{_drawn(result)} Filled marks are measured points, upright ticks are samples of "
        "published curves (one experiment a curve, not one a tick)."
    )


def _drawn(result: RankResult) -> str:
    """Say how many of the listed materials the map shows."""
    n_listed = result.shortlist["material"].nunique()
    n_drawn = min(MOST_LINES, n_listed)
    return f"{n_drawn} of {n_listed} listed materials are drawn, best first."


def _interval_svg(result: RankResult) -> str:
    return figure_svg(
        draw_intervals(result),
        "Intervals of the listed candidates",
        "One bar a candidate: predicted centre with the 90 % interval, window in grey.",
        "intervals",
    )


def _interval_caption(result: RankResult) -> str:
    listed = result.shortlist
    name = result.specification.target.quantity
    width = (
        (listed[f"{name}_high_eV"] - listed[f"{name}_low_eV"])
        .groupby(listed["record_state"])
        .mean()
    )
    parts = [f"{value:.2f} eV ({state})" for state, value in width.items()]
    low, high = result.specification.target.energies_eV
    return (
        f"Mean width of the 90 % intervals: {', '.join(parts)}; the window is "
        f"{high - low:.3f} eV wide."
    )


def _evidence_rows(evidence: pd.DataFrame) -> list[dict[str, Any]]:
    return [{str(k): v for k, v in row.items()} for row in evidence.to_dict("records")]


def _changes(result: RankResult) -> list[str]:
    """Say what would change the ranking."""
    listed, notes = result.shortlist, []
    if len(listed) > 1:
        gap = listed["chance_in_window"].iloc[0] - listed["chance_in_window"].iloc[1]
        notes.append(
            f"The first two differ by {gap:.1%} in chance; a difference below a few per cent is "
            "not a reason to prefer one."
        )
    tight = listed.iloc[int(listed["size_tolerance_nm"].to_numpy().argmin())]
    notes.append(
        f"{_short(tight['material'])} needs the tightest size control "
        f"({tight['size_tolerance_nm']:.2f} nm); a mean diameter that is off by more moves it out."
    )
    new = listed[listed["record_state"].eq("new")]["material"].tolist()
    if new:
        notes.append(
            f"One measured sample each of {', '.join(map(_short, new))} would replace an "
            "interval taken from other materials by one of its own."
        )
    return notes


def _sources(result: RankResult) -> list[dict[str, Any]]:
    """Cite what stands behind the listed materials, and say whose figures were recalled."""
    materials = result.shortlist["material"].unique().tolist()
    bulk = read_table("bulk_semiconductors")
    stokes = read_table("stokes_shifts").set_index("name")
    families = result.scored.drop_duplicates("material").set_index("material")["family"]
    shifts = pd.DataFrame(
        {"material": m, **stokes.loc[m if m in stokes.index else families[m]]} for m in materials
    )
    columns = ["source", "material", "from_memory"]
    used = pd.concat(
        [t.loc[t["material"].isin(materials), columns] for t in (result.model.rows_, bulk, shifts)]
    )
    citations = read_table("sources").set_index("source")["citation"]
    rows = []
    for source, part in used.groupby("source", sort=True):
        recalled = int(part["from_memory"].astype(bool).sum())
        rows.append(
            {
                "source": source,
                "materials": ", ".join(map(_short, sorted(set(part["material"])))),
                "citation": citations.get(source, "a table of the user's own"),
                "recalled": f"{recalled} of {len(part)} figures" if recalled else "",
            }
        )
    return rows
