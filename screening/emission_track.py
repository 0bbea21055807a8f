"""The emission track: quantum dots by material and diameter."""

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from features.errors import NothingQualifiesError, explain
from features.size_control import needed_size_spread, spread_for_share
from features.size_gap import training_rows
from screening.candidates import candidate_grid, choose_materials
from screening.dots import SizeGapModel
from screening.fingerprint import text_hash
from screening.ranking import COLUMNS, caution_column, nearest_records
from screening.reach import FAR, distance_to_data
from screening.scores import Window, describe, score
from screening.sweep import Sweep, SweepCounts
from screening.tracks import Sections
from screening.trained import dot_fingerprint, trained_dots
from screening.uncertainty_split import uncertainty_parts

if TYPE_CHECKING:
    from screening.ranking import RankResult
    from screening.specification import Candidates, Specification

__all__ = ["EmissionTrack"]


class EmissionTrack:
    """Quantum dots: see `screening.tracks.Track`.

    Parameters
    ----------
    specification : Specification
    kept : pathlib.Path or None, default None
        Folder for the finished blocks of a sweep.
    """

    def __init__(self, specification: "Specification", kept: Path | None = None) -> None:
        self.specification, self.kept = specification, kept
        self.counts: SweepCounts | None = None
        self.columns: tuple[str, ...] = COLUMNS
        self.brief = {
            "rank": 0,
            "material": 0,
            "diameter_nm": 2,
            "emission_nm": 0,
            "fwhm_meV": 0,
            "chance_in_window": 2,
            "fraction_in_window": 2,
            "size_tolerance_nm": 2,
            "record_state": 0,
        }

    def check(self) -> None:
        """Refuse unknown materials and families."""
        wanted = self.specification.candidates
        if not wanted.spaces or wanted.materials or wanted.families:
            choose_materials(wanted, training_rows()["material"])

    def model(self) -> SizeGapModel:
        """Return the model, learned now or rebuilt from what was kept."""
        return trained_dots(self.specification.seed)

    def model_hash(self) -> str:
        """Return the hash of all that the model follows from."""
        return dot_fingerprint(self.specification.seed)

    def candidates(self, model: SizeGapModel) -> tuple[pd.DataFrame, pd.DataFrame]:
        """Return every material at every diameter, and the refused materials.

        With candidate spaces only the materials that the shortlist will hold, found by a sweep.
        """
        wanted = self.specification.candidates
        materials, refused = _named_materials(wanted, model)
        if wanted.spaces:
            materials, refused = self._swept(model, materials, refused)
        return candidate_grid(materials, wanted), refused

    def _swept(
        self, model: SizeGapModel, named: list[str], refused: pd.DataFrame
    ) -> tuple[list[str], pd.DataFrame]:
        rows = model.rows_[["material", "diameter_nm", "optical_gap_eV"]].to_csv()
        key = text_hash(self.specification.model_dump_json() + self.model_hash() + rows)
        sweep = Sweep(self.specification, model, self, self.kept, key)
        found = sweep.run(named)
        self.counts = sweep.counts
        if not found:
            raise NothingQualifiesError(
                explain(
                    "no candidate qualifies",
                    where="candidates.spaces",
                    found=f"{sweep.counts.compositions} compositions, none likely enough and "
                    "within the limits",
                    do="widen the window, the spaces or the limits, or lower least_chance",
                )
            )
        return found, pd.concat([refused, _sweep_refusals(sweep.counts, len(found))])

    def score(self, model: SizeGapModel, grid: pd.DataFrame) -> pd.DataFrame:
        """Return gap, emission, linewidth, chance, fraction, tolerance and yield."""
        low, high = self.specification.target.energies_eV
        window = Window(self.specification.target.quantity, low, high)
        laboratory = self.specification.laboratory
        sizes = laboratory.size_shape()
        described = describe(model, grid, sizes)
        scored = score(model, described, window, sizes, laboratory.least_fraction)
        scored["size_spread_needed"] = _spread_needed(scored, self.specification)
        return scored

    def order(self, scored: pd.DataFrame) -> tuple[pd.DataFrame, list[bool]]:
        """Sort by chance, then by tolerance, then by name and size."""
        keys = pd.DataFrame(
            {
                "chance": scored["chance_in_window"].round(9),
                "room": scored["size_tolerance_nm"].round(9),
                "material": scored["material"],
                "diameter_nm": scored["diameter_nm"],
            }
        )
        return keys, [False, False, True, True]

    def finish(self, best: pd.DataFrame, model: SizeGapModel) -> pd.DataFrame:
        """Add distance to the data, parts of the uncertainty, nearest record and cautions."""
        parts = uncertainty_parts(model, best, self.specification.target.quantity)
        described = best.join(distance_to_data(model, best)[["kernel_distance", "reach"]]).join(
            parts[[name for name in parts if name in self.columns]]
        )
        basis = best.get("basis", "record")
        return described.assign(
            bulk_basis=basis,
            nearest_source=nearest_records(best, model),
            cautions=caution_column(best["material"]),
        )

    def warnings(self, result: "RankResult") -> list[str]:
        """Count the materials without size data, and those farther out than was ever checked."""
        notes = []
        n_rows = len(result.shortlist)
        new = result.shortlist["record_state"].eq("new").sum()
        if new:
            notes.append(f"{new} of {n_rows} rows are materials without size data")
        for basis, words in (("alloy", "interpolated"), ("model", "estimated from composition")):
            count = int(result.shortlist["bulk_basis"].eq(basis).sum())
            if count:
                notes.append(f"the bulk constants of {count} of {n_rows} rows are {words}")
        far = result.shortlist["reach"].eq(FAR).sum()
        if far:
            notes.append(f"{far} of {n_rows} rows lie farther from the data than was ever checked")
        return notes

    def draw(self, result: "RankResult", ax: Any) -> Any:
        """Draw gap against size with the window and the shortlist."""
        from screening.reporting.figures import draw_map  # noqa: PLC0415 - pyplot is slow to load

        return draw_map(result, ax)

    def sections(self, result: "RankResult", evidence: pd.DataFrame) -> Sections:
        """Return the parts of the report on quantum dots."""
        from screening.reporting.emission_sections import (  # noqa: PLC0415 - figures load slowly
            emission_sections,
        )

        return emission_sections(result, evidence)


def _named_materials(wanted: "Candidates", model: SizeGapModel) -> tuple[list[str], pd.DataFrame]:
    """Return the materials that the specification names besides its spaces."""
    if wanted.spaces and not (wanted.materials or wanted.families):
        return [], pd.DataFrame(columns=["material", "reason", "limit", "verdict"])
    return choose_materials(wanted, model.rows_["material"])


def _sweep_refusals(counts: SweepCounts, n_found: int) -> pd.DataFrame:
    """Return what became of the compositions that are not listed, together."""
    rows = [(f"{number} compositions", reason) for reason, number in counts.refused.items()]
    others = counts.compositions - n_found
    rows.append((f"{others} compositions", "less likely than those listed, or outside the limits"))
    frame = pd.DataFrame(rows, columns=["material", "reason"])
    return frame.assign(limit="candidates.spaces", verdict="fail")


def _spread_needed(scored: pd.DataFrame, specification: "Specification") -> pd.Series:
    """Return the size spread at which a centred batch is good and meets the linewidth asked."""
    low, high = specification.target.energies_eV
    slope = scored["slope_eV_per_nm"] * scored["diameter_nm"]
    share = specification.laboratory.least_fraction
    needed = spread_for_share(0.5 * (high - low), slope, share)
    limit_meV = specification.limits.highest_fwhm_meV
    if limit_meV is not None:
        width = needed_size_spread(limit_meV / 1000.0, scored["single_dot_fwhm_eV"], slope)
        needed = np.fmin(needed, np.nan_to_num(width))
    return pd.Series(needed, index=scored.index)
