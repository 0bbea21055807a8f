"""Parts of the report on metal particles: verdict, shortlist, pictures, what is behind them."""

from typing import Any

import pandas as pd
from markupsafe import Markup

from features.tables import read_table
from screening.catalyst_scores import REFERENCE_PARTICLE
from screening.ranking import RankResult
from screening.reporting.catalyst_figures import (
    draw_sites,
    draw_sizes,
    site_numbers,
    size_numbers,
)
from screening.reporting.cells import cited, plain_rows, short
from screening.reporting.figures import MOST_LINES, figure_svg
from screening.reporting.particle_drawing import draw_particle
from screening.surface_target import SurfaceTarget
from screening.tracks import Sections
from screening.volcano import SurfaceQuestion

__all__ = ["catalyst_sections"]


def catalyst_sections(result: RankResult) -> Sections:
    """Return the parts of the report on metal particles.

    Parameters
    ----------
    result : RankResult

    Returns
    -------
    Sections
    """
    target = result.specification.target
    assert isinstance(target, SurfaceTarget)
    question = target.question
    has_volcano = question.volcano is not None
    return Sections(
        "catalyst.html.j2",
        {
            "verdict": _verdict(result, question),
            "window": _window_text(question),
            "rows": plain_rows(result.shortlist),
            "has_volcano": has_volcano,
            "reference": "{0} {2:g} nm".format(*REFERENCE_PARTICLE),
            "size_svg": Markup(_size_svg(result)),  # noqa: S704 - drawn here, names escaped
            "size_caption": _size_caption(result, has_volcano=has_volcano),
            "size_rows": plain_rows(size_numbers(result)),
            "site_svg": Markup(_site_svg(result)),  # noqa: S704 - drawn here, names escaped
            "site_caption": _site_caption(result),
            "site_table": _site_table(result),
            "particle_svg": Markup(_particle_svg(result)),  # noqa: S704 - drawn here
            "particle_caption": _particle_caption(result, question),
            "volcano": question.volcano,
            "changes": _changes(result),
            "sources": _sources(result, question),
        },
    )


def _name(row: Any) -> str:
    shape = str(row["shape"]).replace("_", " ")
    return f"{short(row['material'])} at {row['diameter_nm']:.1f} nm ({shape})"


def _verdict(result: RankResult, question: SurfaceQuestion) -> str:
    listed = result.shortlist.head(3)
    best = listed.iloc[0]
    count = {1: "this one", 2: "these two", 3: "these three"}[len(listed)]
    names = ", ".join(_name(row) for row in listed.to_dict("records"))
    sites = (
        f"Of {short(best['material'])}, {best['sites_in_window_umol_per_g']:.0f} µmol of sites per "
        f"gram are expected in the window (90 %: {best['sites_in_window_low_umol_per_g']:.0f} to "
        f"{best['sites_in_window_high_umol_per_g']:.0f}), most of them {best['best_site']}, each "
        f"inside with a chance of {best['chance_in_window']:.0%}."
    )
    if question.volcano is None:
        return f"Make {count} first: {names}. {sites}"
    activity = (
        "Its relative volcano activity per mass is "
        f"{_times(best['relative_volcano_activity_per_mass'])} that of a Pt particle of 3 nm "
        f"(90 %: {_times(best['relative_volcano_activity_low_per_mass'])} to "
        f"{_times(best['relative_volcano_activity_high_per_mass'])})."
    )
    return f"Make {count} first: {names}. {sites} {activity}"


def _times(value: float) -> str:
    """Write a ratio with as few digits as it deserves.

    Examples
    --------
    >>> _times(2.34), _times(41234.0)
    ('2.3 times', '4.1e+04 times')
    """
    return f"{value:.2g} times"


def _window_text(question: SurfaceQuestion) -> str:
    low, high = question.window_eV
    ends = f"from {low:.3f} to {high:.3f} eV"
    if question.volcano is None:
        kind = "free energy of adsorption" if question.shift_eV else "adsorption energy"
        return f"{kind} of {question.label} {ends}"
    volcano = question.volcano
    against = f" against {question.relative_to}" if question.relative_to else ""
    return (
        f"{volcano.title.lower()}: {volcano.descriptor} of {question.label}{against} {ends}, where "
        "the relative volcano activity is within a factor of ten of the top"
    )


def _size_svg(result: RankResult) -> str:
    return figure_svg(
        draw_sizes(result),
        "What ranks, against diameter",
        "Curves of the listed metals, the first with its 90 % band, listed candidates as marks.",
        "sizes",
    )


def _size_caption(result: RankResult, *, has_volcano: bool) -> str:
    best = result.shortlist.iloc[0]
    what = "relative volcano activity per mass" if has_volcano else "sites in the window per gram"
    pairs = result.shortlist.drop_duplicates(["material", "shape"])
    drawn = min(MOST_LINES, len(pairs))
    return (
        f"{short(best['material'])} has its greatest {what} in the range asked at "
        f"{best['diameter_nm']:.1f} nm. The band is the 90 % interval of the first; {drawn} of "
        f"{len(pairs)} listed metals and shapes are drawn, best first."
    )


def _site_svg(result: RankResult) -> str:
    return figure_svg(
        draw_sites(result),
        "Surface sites by size",
        "Surface sites per gram of the first candidate's metal and shape against diameter, stacked "
        "by kind of site.",
        "sites",
    )


def _site_caption(result: RankResult) -> str:
    best = result.shortlist.iloc[0]
    return (
        f"Sites of {short(best['material'])}, {str(best['shape']).replace('_', ' ')}: at "
        f"{best['diameter_nm']:.1f} nm {best['dispersion']:.0%} of the atoms lie at the surface."
    )


def _site_table(result: RankResult) -> dict[str, Any]:
    """Return the numbers of the site map: head and rows, thinned."""
    numbers = site_numbers(result).iloc[::6]
    kinds = [str(name) for name in numbers.columns if name != "diameter_nm"]
    rows = [
        {"diameter_nm": size, "amounts": list(amounts)}
        for size, *amounts in numbers.itertuples(index=False, name=None)
    ]
    return {"kinds": kinds, "rows": rows}


def _particle_svg(result: RankResult) -> str:
    best = result.shortlist.iloc[0]
    return figure_svg(
        draw_particle(best["material"], best["shape"], float(best["diameter_nm"])),
        "The first candidate",
        "The particle of whole layers nearest to the first candidate's size, its surface atoms "
        "coloured and marked by kind of site.",
        "particle",
    )


def _particle_caption(result: RankResult, question: SurfaceQuestion) -> str:
    best = result.shortlist.iloc[0]
    steps = (
        " Step sites lie at the rims of unfinished layers, which this perfect crystal does not show."
        if question.is_step
        else ""
    )
    return (
        f"{_name(best)}, drawn as the nearest particle of whole layers; most of the sites expected "
        f"in the window are {best['best_site']} ({best['best_site_share']:.0%} of the surface "
        f"atoms).{steps}"
    )


def _changes(result: RankResult) -> list[str]:
    """Say what would change the ranking."""
    listed = result.shortlist
    wide = (listed["adsorption_energy_high_eV"] - listed["adsorption_energy_low_eV"]).to_numpy()
    widest = listed.iloc[int(wide.argmax())]
    shared = (
        "All sites and sizes of one metal share the error of its surface: two sizes of one metal "
        "are compared more surely than two metals."
    )
    doubt = (
        f"{short(widest['material'])} has the widest interval ({wide.max():.2f} eV): one measured "
        "or computed adsorption energy of it would narrow the list most."
    )
    notes = [shared, doubt]
    if len(listed) > 1:
        first, second = listed["chance_in_window"].iloc[0], listed["chance_in_window"].iloc[1]
        notes.append(
            f"The best sites of the first two lie in the window with chances of {first:.0%} and "
            f"{second:.0%}."
        )
    return notes


def _sources(result: RankResult, question: SurfaceQuestion) -> list[dict[str, Any]]:
    """Cite what stands behind the listed metals, and say whose figures were recalled."""
    listed = result.shortlist
    names = {m for text in listed["material"] for m in _elements(text)}
    pure = read_table("adsorption_pure").rename(columns={"metal": "material"})
    alloys = read_table("adsorption_alloys").rename(columns={"composition": "material"})
    keep = alloys["material"].map(lambda text: set(_elements(text)) <= names)
    pure = pure[pure["material"].isin(names)]
    metals = read_table("metals").rename(columns={"element": "material"})
    metals = metals[metals["material"].isin(names)]
    tables = [t[t["adsorbate"].isin(question.adsorbates)] for t in (pure, alloys[keep])]
    parts = [t[["source", "material", "from_memory"]] for t in (*tables, metals)]
    if question.volcano is not None:
        own = read_table("reactions").set_index("reaction").loc[[question.volcano.name]]
        parts.append(own.assign(material="the volcano")[["source", "material", "from_memory"]])
    return cited(pd.concat(parts))


def _elements(material: str) -> list[str]:
    from features.formula import parse_formula  # noqa: PLC0415 - only here

    return list(parse_formula(material).amounts)
