"""The catalyst track: metal particles by metal or alloy, shape and diameter."""

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from features.formula import parse_formula
from features.hazards import caution_text
from screening.adsorption import AdsorptionModel
from screening.catalyst_candidates import check_adsorbates, choose_particles, particle_grid
from screening.catalyst_scores import score_particles
from screening.surface_target import SurfaceTarget
from screening.tracks import Sections
from screening.trained_surfaces import surface_fingerprint, trained_surfaces

if TYPE_CHECKING:
    from screening.ranking import RankResult
    from screening.specification import Specification
    from screening.volcano import SurfaceQuestion

__all__ = ["COLUMNS", "VOLCANO_COLUMNS", "CatalystTrack"]

COLUMNS = (
    "rank",
    "material",
    "structure",
    "shape",
    "diameter_nm",
    "atoms",
    "dispersion",
    "best_site",
    "best_site_share",
    "adsorbate",
    "adsorption_energy_eV",
    "adsorption_energy_low_eV",
    "adsorption_energy_high_eV",
    "adsorption_free_energy_eV",
    "descriptor_eV",
    "descriptor_low_eV",
    "descriptor_high_eV",
    "chance_in_window",
    "sites_in_window_umol_per_g",
    "sites_in_window_low_umol_per_g",
    "sites_in_window_high_umol_per_g",
    "sites_in_window_umol_per_m2",
    "sites_in_window_low_umol_per_m2",
    "sites_in_window_high_umol_per_m2",
    "record_state",
    "limits",
    "hazard_class",
    "supply_class",
    "is_unbeaten",
    "nearest_source",
    "supply",
    "cautions",
)
"""Columns of the shortlist, in order."""

VOLCANO_COLUMNS = tuple(
    f"relative_volcano_activity_{end}per_{unit}"
    for unit in ("mass", "area")
    for end in ("", "low_", "high_")
)
"""Columns more where a reaction is named, before record_state."""

_TABULATED = frozenset({"tabulated surface", "tabulated composition"})


def _question(specification: "Specification") -> "SurfaceQuestion":
    assert isinstance(specification.target, SurfaceTarget)
    return specification.target.question


class CatalystTrack:
    """Metal particles: see `screening.tracks.Track`.

    Parameters
    ----------
    specification : Specification
    """

    def __init__(self, specification: "Specification") -> None:
        self.question = _question(specification)
        self.columns: tuple[str, ...] = COLUMNS
        self.brief = {
            "rank": 0,
            "material": 0,
            "shape": 0,
            "diameter_nm": 2,
            "best_site": 0,
            "adsorption_energy_eV": 2,
            "chance_in_window": 2,
            "sites_in_window_umol_per_g": 0,
        }
        if self.question.volcano is not None:
            at = COLUMNS.index("record_state")
            self.columns = COLUMNS[:at] + VOLCANO_COLUMNS + COLUMNS[at:]
            self.brief["relative_volcano_activity_per_mass"] = 2
        self.brief["record_state"] = 0

    def check(self, specification: "Specification") -> None:
        """Refuse unknown adsorbates, metals and shapes, and sizes below 13 atoms."""
        check_adsorbates(self.question)
        choose_particles(specification.candidates, self.question)

    def model(self, specification: "Specification") -> AdsorptionModel:
        """Return the model, learned now or rebuilt from what was kept."""
        return trained_surfaces()

    def model_hash(self, specification: "Specification") -> str:
        """Return the hash of all that the model follows from."""
        return surface_fingerprint()

    def candidates(
        self, specification: "Specification", model: AdsorptionModel
    ) -> tuple[pd.DataFrame, pd.DataFrame]:
        """Return every metal and shape at every diameter, and the refused ones."""
        self.check(specification)
        chosen, refused = choose_particles(specification.candidates, self.question)
        return particle_grid(chosen, specification.candidates), refused

    def score(
        self, specification: "Specification", model: AdsorptionModel, grid: pd.DataFrame
    ) -> pd.DataFrame:
        """Return energies, chance, sites in the window and relative volcano activity."""
        return score_particles(model, grid, self.question, specification.seed)

    def order(self, scored: pd.DataFrame) -> tuple[pd.DataFrame, list[bool]]:
        """Sort by relative volcano activity per mass, or by sites in the window per gram."""
        value = (
            np.log10(np.maximum(scored["relative_volcano_activity_per_mass"], 1e-300))
            if self.question.volcano
            else scored["sites_in_window_umol_per_g"]
        )
        keys = pd.DataFrame(
            {
                "value": np.asarray(value).round(6),
                "chance": scored["chance_in_window"].to_numpy().round(9),
                "material": scored["material"].to_numpy(),
                "shape": scored["shape"].to_numpy(),
                "diameter_nm": scored["diameter_nm"].to_numpy(),
            },
            index=scored.index,
        )
        return keys, [False, False, True, True, True]

    def finish(self, best: pd.DataFrame, model: AdsorptionModel) -> pd.DataFrame:
        """Add the cautions; the nearest source comes with the energies."""
        return best.assign(
            cautions=[caution_text(dict(parse_formula(m).amounts)) for m in best["material"]]
        )

    def warnings(self, result: "RankResult") -> list[str]:
        """Count the surfaces that no table holds; say what is not used."""
        listed = result.shortlist
        notes = []
        new = int((~listed["record_state"].isin(_TABULATED)).sum())
        if new:
            notes.append(f"{new} of {len(listed)} rows are surfaces that no table holds")
        if "laboratory" in result.specification.model_fields_set:
            notes.append("the size spread of [laboratory] is not used for metal particles")
        return notes

    def draw(self, result: "RankResult", ax: Any) -> Any:
        """Draw sites or relative volcano activity against size."""
        from screening.reporting.catalyst_figures import (  # noqa: PLC0415 - pyplot loads slowly
            draw_sizes,
        )

        return draw_sizes(result, ax)

    def sections(self, result: "RankResult", evidence: pd.DataFrame) -> Sections:
        """Return the parts of the report on metal particles."""
        from screening.reporting.catalyst_sections import (  # noqa: PLC0415 - figures load slowly
            catalyst_sections,
        )

        return catalyst_sections(result)
