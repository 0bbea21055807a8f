"""The emission track: quantum dots by material and diameter."""

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from features.size_control import needed_size_spread, spread_for_share
from features.size_gap import training_rows
from screening.candidates import candidate_grid, choose_materials
from screening.dots import SizeGapModel
from screening.ranking import COLUMNS, caution_column, nearest_records
from screening.scores import Window, describe, score
from screening.tracks import Sections
from screening.trained import dot_fingerprint, trained_dots

if TYPE_CHECKING:
    from screening.ranking import RankResult
    from screening.specification import Specification

__all__ = ["EmissionTrack"]


class EmissionTrack:
    """Quantum dots: see `screening.tracks.Track`."""

    def __init__(self) -> None:
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

    def check(self, specification: "Specification") -> None:
        """Refuse unknown materials and families."""
        choose_materials(specification.candidates, training_rows()["material"])

    def model(self, specification: "Specification") -> SizeGapModel:
        """Return the model, learned now or rebuilt from what was kept."""
        return trained_dots(specification.seed)

    def model_hash(self, specification: "Specification") -> str:
        """Return the hash of all that the model follows from."""
        return dot_fingerprint(specification.seed)

    def candidates(
        self, specification: "Specification", model: SizeGapModel
    ) -> tuple[pd.DataFrame, pd.DataFrame]:
        """Return every material at every diameter, and the refused materials."""
        wanted = specification.candidates
        materials, refused = choose_materials(wanted, model.rows_["material"])
        return candidate_grid(materials, wanted), refused

    def score(
        self, specification: "Specification", model: SizeGapModel, grid: pd.DataFrame
    ) -> pd.DataFrame:
        """Return gap, emission, linewidth, chance, fraction and tolerance."""
        low, high = specification.target.energies_eV
        window = Window(specification.target.quantity, low, high)
        sizes = specification.laboratory.size_shape()
        described = describe(model, grid, sizes)
        scored = score(model, described, window, sizes, specification.laboratory.least_fraction)
        scored["size_spread_needed"] = _spread_needed(scored, specification)
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
        """Add the nearest record and the cautions."""
        return best.assign(
            nearest_source=nearest_records(best, model), cautions=caution_column(best["material"])
        )

    def warnings(self, result: "RankResult") -> list[str]:
        """Count the materials without size data."""
        new = result.shortlist["record_state"].eq("new").sum()
        if not new:
            return []
        return [f"{new} of {len(result.shortlist)} rows are materials without size data"]

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
