"""Parts of the report on quantum dots: verdict, shortlist, map, intervals, evidence, sources."""

from typing import Any

import pandas as pd
from markupsafe import Markup

from features.tables import read_table
from screening.ranking import RankResult
from screening.reporting.cells import cited, plain_rows, short
from screening.reporting.figures import (
    MOST_LINES,
    curve_numbers,
    draw_intervals,
    draw_map,
    figure_svg,
)
from screening.reporting.swatch import emission_colour
from screening.reporting.trade_offs import draw_trade_offs
from screening.tracks import Sections

__all__ = ["emission_sections"]


def emission_sections(result: RankResult, evidence: pd.DataFrame) -> Sections:
    """Return the parts of the report on quantum dots.

    Parameters
    ----------
    result : RankResult
    evidence : pandas.DataFrame
        Left-out figures as from `screening.running.held_out_figures`; may be empty.

    Returns
    -------
    Sections
    """
    return Sections(
        "emission.html.j2",
        {
            "verdict": _verdict(result),
            "rows": _rows(result),
            "window": _window_text(result),
            "map_svg": Markup(_map_svg(result)),  # noqa: S704 - drawn here, names escaped
            "map_caption": _map_caption(result),
            "map_rows": curve_numbers(result).to_dict("records"),
            "interval_svg": Markup(_interval_svg(result)),  # noqa: S704 - drawn here, names escaped
            "interval_caption": _interval_caption(result),
            "trade_svg": Markup(_trade_svg(result)),  # noqa: S704 - drawn here, names escaped
            "trade_caption": _trade_caption(result),
            "own": _own(result),
            "evidence": plain_rows(evidence),
            "changes": _changes(result),
            "sources": _sources(result),
        },
    )


def _verdict(result: RankResult) -> str:
    listed = result.shortlist.head(3)
    names = ", ".join(
        f"{short(m)} at {d:.2f} nm"
        for m, d in zip(listed["material"], listed["diameter_nm"], strict=True)
    )
    best = listed.iloc[0]
    reason = (
        f"{short(best['material'])} has the highest chance of a batch inside the window "
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
    rows = plain_rows(result.shortlist)
    for row in rows:
        row["colour"] = emission_colour(row["emission_eV"], row["fwhm_meV"] / 1000.0)
    return rows


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
        f"{short(best['material'])} crosses the window at {best['diameter_nm']:.2f} nm; "
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


def _trade_svg(result: RankResult) -> str:
    return figure_svg(
        draw_trade_offs(result),
        "Chance against size tolerance",
        "One mark a listed candidate: across, the drift of the diameter that it bears; upwards, "
        "its chance. Marks tell hazard classes, rings the candidates that no other beats.",
        "trade-offs",
    )


def _trade_caption(result: RankResult) -> str:
    listed = result.shortlist
    free = listed[listed["is_unbeaten"]]
    names = ", ".join(short(name) for name in free["material"].head(4))
    more = f" and {len(free) - 4} more" if len(free) > 4 else ""
    mildest = listed.iloc[int(listed["hazard_class"].to_numpy().argmin())]
    return (
        f"{names}{more} are beaten by no other row in chance, tolerance, hazard and supply "
        f"together. The lowest hazard class listed is {mildest['hazard_class']} of 4 "
        f"({short(mildest['material'])}); a class is no clearance."
    )


def _own(result: RankResult) -> dict[str, Any] | None:
    """Return what the laboratory's results changed, or nothing."""
    if result.update is None or result.before is None:
        return None
    return {
        "bias": result.update.bias.mean,
        "bias_sd": result.update.bias.sd,
        "findings": result.update.findings,
        "rows": plain_rows(result.update.results),
        "before": plain_rows(result.before.head(5)),
    }


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
        f"{short(tight['material'])} needs the tightest size control "
        f"({tight['size_tolerance_nm']:.2f} nm); a mean diameter that is off by more moves it out."
    )
    new = listed[listed["record_state"].eq("new")]["material"].tolist()
    if new:
        notes.append(
            f"One measured sample each of {', '.join(map(short, new))} would replace an "
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
    return cited(used)
