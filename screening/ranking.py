"""The main job: a specification in, a ranked shortlist with its evidence out."""

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from features.errors import NothingQualifiesError, explain
from features.formula import parse_formula
from features.hazards import caution_text
from features.semiconductors import has_indirect_gap
from screening.dot_design import coordinates
from screening.dots import ON_RECORD, SizeGapModel
from screening.limits import REJECTED, judge
from screening.tracks import track_of
from screening.trade_offs import add_supply

if TYPE_CHECKING:
    from screening.laboratory import LabUpdate
    from screening.specification import Specification
    from screening.tracks import Track

__all__ = ["COLUMNS", "RankResult", "caution_column", "nearest_records", "rank", "shortlist_of"]

COLUMNS = (
    "rank",
    "material",
    "structure",
    "shape",
    "diameter_nm",
    "optical_gap_eV",
    "optical_gap_low_eV",
    "optical_gap_high_eV",
    "emission_eV",
    "emission_low_eV",
    "emission_high_eV",
    "emission_nm",
    "fwhm_meV",
    "chance_in_window",
    "fraction_in_window",
    "size_tolerance_nm",
    "batch_yield",
    "size_spread_needed",
    "record_state",
    "bulk_basis",
    "kernel_distance",
    "reach",
    "model_part_sd_eV",
    "data_scatter_sd_eV",
    "size_control_sd_eV",
    "correction_sd_eV",
    "shrinks_with_one_more_sample",
    "limits",
    "hazard_class",
    "supply_class",
    "is_unbeaten",
    "nearest_source",
    "supply",
    "cautions",
)
"""Columns of the shortlist of quantum dots, in order."""

_INDIRECT = "indirect bulk gap, emission may be weak and broad; "


@dataclass(frozen=True)
class RankResult:
    """What a run found.

    Parameters
    ----------
    specification : Specification
    shortlist : pandas.DataFrame
        Columns of the track (`COLUMNS` for quantum dots), best first.
    scored : pandas.DataFrame
        Every candidate with its scores.
    rejected : pandas.DataFrame
        Columns `screening.limits.REJECTED`.
    model : SizeGapModel or AdsorptionModel
    update : LabUpdate or None
        What the laboratory's own results changed, where there are any.
    before : pandas.DataFrame or None
        The shortlist as it was without them.
    """

    specification: "Specification"
    shortlist: pd.DataFrame
    scored: pd.DataFrame
    rejected: pd.DataFrame
    model: Any
    update: "LabUpdate | None" = None
    before: pd.DataFrame | None = None

    @property
    def track(self) -> "Track":
        """The track that the specification belongs to."""
        return track_of(self.specification)

    def to_frame(self) -> pd.DataFrame:
        """Return a copy of the shortlist."""
        return self.shortlist.copy()

    def chance_of_one(self, n_first: int = 3) -> float:
        """Return the chance that at least one of the first rows lands, taken as independent."""
        chances = self.shortlist["chance_in_window"].to_numpy()[:n_first]
        return float(1.0 - np.prod(1.0 - chances))

    def plot(self, ax: Any = None) -> Any:
        """Draw the candidates against size.

        Parameters
        ----------
        ax : matplotlib.axes.Axes or None, default None

        Returns
        -------
        matplotlib.axes.Axes
        """
        return self.track.draw(self, ax)

    def _repr_html_(self) -> str:
        return str(self.shortlist.to_html(index=False, escape=True, float_format="{:.3f}".format))


def rank(specification: "Specification", model: Any, kept: Path | None = None) -> RankResult:
    """Rank the candidates of a specification.

    Parameters
    ----------
    specification : Specification
    model : SizeGapModel or AdsorptionModel
        Of the specification's track, fitted and calibrated.
    kept : pathlib.Path or None, default None
        Folder in which a sweep keeps its finished blocks, to be taken up by the same run.

    Returns
    -------
    RankResult

    Raises
    ------
    SpecificationError
        If a material, family, shape or adsorbate is unknown.
    NothingQualifiesError
        If no candidate reaches the least chance.
    """
    track = track_of(specification, kept)
    grid, refused = track.candidates(model)
    scored = track.score(model, grid)
    judgement = judge(scored, specification.limits)
    scored["is_allowed"] = judgement.allowed
    allowed = scored[judgement.allowed]
    best = shortlist_of(allowed, specification, track)
    missed = _missed(allowed, specification)
    turned_down = judgement.rejected(scored)
    if best.empty:
        raise NothingQualifiesError(_nothing(scored, turned_down, specification))
    best["limits"] = judgement.notes(scored.index.get_indexer(best.index).tolist())
    best.insert(0, "rank", np.arange(1, len(best) + 1))
    best = add_supply(track.finish(best, model))
    rejected = pd.concat([refused, turned_down, missed], ignore_index=True)
    return RankResult(
        specification,
        best[list(track.columns)].reset_index(drop=True),
        scored,
        rejected.reindex(columns=list(REJECTED)),
        model,
    )


def _ordered(scored: pd.DataFrame, track: "Track") -> pd.DataFrame:
    """Sort by the track's keys, so that ties fall the same way."""
    keys, rising = track.order(scored)
    order = keys.sort_values(list(keys.columns), ascending=rising, kind="stable").index
    return scored.loc[order]


def shortlist_of(
    scored: pd.DataFrame, specification: "Specification", track: "Track"
) -> pd.DataFrame:
    """Take the best diameters of each material, of one shape apart by the stated spacing.

    Parameters
    ----------
    scored : pandas.DataFrame
        Allowed candidates with their scores.
    specification : Specification
    track : Track

    Returns
    -------
    pandas.DataFrame
        Rows of ``scored``, best first.
    """
    cut = specification.shortlist
    ordered = _ordered(scored[scored["chance_in_window"] >= max(cut.least_chance, 1e-12)], track)
    taken: dict[str, list[tuple[str, float]]] = {}
    rows = []
    for index, material, shape, diameter in zip(
        ordered.index, ordered["material"], ordered["shape"], ordered["diameter_nm"], strict=True
    ):
        own = taken.setdefault(material, [])
        apart = all(abs(diameter - size) >= cut.spacing_nm for kind, size in own if kind == shape)
        if apart and len(own) < cut.per_material:
            own.append((shape, diameter))
            rows.append(index)
        if len(rows) == cut.length:
            break
    return ordered.loc[rows].copy()


def _missed(scored: pd.DataFrame, specification: "Specification") -> pd.DataFrame:
    """List materials whose best chance stays below the least."""
    least = specification.shortlist.least_chance
    best = scored.groupby("material", sort=True)["chance_in_window"].max()
    short = best[best < max(least, 1e-12)]
    reasons = [f"best chance {value:.2g} is below {least:g}" for value in short]
    limit = "shortlist.least_chance"
    table = {"material": short.index, "reason": reasons, "limit": limit, "verdict": "fail"}
    return pd.DataFrame(table | {"chance_in_window": short.to_numpy()})


def _nothing(
    scored: pd.DataFrame, turned_down: pd.DataFrame, specification: "Specification"
) -> str:
    if not turned_down.empty:
        return _all_turned_down(turned_down)
    best = scored.iloc[int(np.argmax(scored["chance_in_window"]))]
    return explain(
        "no candidate qualifies",
        where="shortlist.least_chance",
        expected=f"a chance of at least {specification.shortlist.least_chance:g}",
        found=f"at best {best['chance_in_window']:.3g} ({best['material']}, "
        f"{best['diameter_nm']:g} nm)",
        do="widen the window, allow more materials or lower least_chance",
    )


def _all_turned_down(turned_down: pd.DataFrame) -> str:
    worst = turned_down["limit"].value_counts()
    best = turned_down.iloc[int(turned_down["chance_in_window"].to_numpy().argmax())]
    counts = ", ".join(f"{name} {count} materials" for name, count in worst.items())
    return explain(
        "no candidate qualifies",
        where="limits",
        found=f"{counts}; the best of them, {best['material']} at {best['diameter_nm']:g} nm "
        f"(chance {best['chance_in_window']:.2g}): {best['reason']}",
        do="loosen a limit, or allow more materials",
    )


def nearest_records(frame: pd.DataFrame, model: SizeGapModel) -> list[str]:
    """Name the record nearest to each candidate, of its own material where there is one.

    Parameters
    ----------
    frame : pandas.DataFrame
        Candidates with bulk constants and record_state.
    model : SizeGapModel

    Returns
    -------
    list of str
        ``material diameter: source key``.
    """
    rows = model.rows_
    trained, wanted = coordinates(rows), coordinates(frame)
    names = []
    for position, (material, state) in enumerate(
        zip(frame["material"], frame["record_state"], strict=True)
    ):
        distance = np.linalg.norm(trained - wanted[position], axis=1)
        if state == ON_RECORD:
            distance = np.where(rows["material"].eq(material), distance, np.inf)
        nearest = rows.iloc[int(np.argmin(distance))]
        names.append(f"{nearest['material']} {nearest['diameter_nm']:.1f} nm: {nearest['source']}")
    return names


def caution_column(materials: pd.Series) -> list[str]:
    """Return the caution of each material in one cell, and whether it may hardly emit."""
    texts = {m: caution_text(dict(parse_formula(m).amounts)) for m in materials.unique()}
    return [
        f"{_INDIRECT}{texts[material]}" if has_indirect_gap(material) else texts[material]
        for material in materials
    ]
