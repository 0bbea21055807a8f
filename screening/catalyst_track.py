"""The catalyst track: metal particles by metal or alloy, shape and diameter."""

from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

from features.errors import NothingQualifiesError, explain
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

_UNMEASURED = "no adsorption energy on record, and unmeasured surfaces are not wanted"
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
        self.specification = specification
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

    def check(self) -> None:
        """Refuse unknown adsorbates, metals and shapes, and sizes below 13 atoms."""
        check_adsorbates(self.question)
        choose_particles(self.specification.candidates, self.question)

    def model(self) -> AdsorptionModel:
        """Return the model, learned now or rebuilt from what was kept."""
        return trained_surfaces()

    def model_hash(self) -> str:
        """Return the hash of all that the model follows from."""
        return surface_fingerprint()

    def candidates(self, model: AdsorptionModel) -> tuple[pd.DataFrame, pd.DataFrame]:
        """Return every metal and shape at every diameter, and the refused ones."""
        self.check()
        chosen, refused = choose_particles(self.specification.candidates, self.question)
        if not self.specification.candidates.unmeasured:
            chosen, refused = self._measured(model, chosen, refused)
        return particle_grid(chosen, self.specification.candidates), refused

    def _measured(
        self, model: AdsorptionModel, chosen: pd.DataFrame, refused: pd.DataFrame
    ) -> tuple[pd.DataFrame, pd.DataFrame]:
        """Keep what the tables hold for every adsorbate of the question."""
        names = chosen["material"].unique().tolist()
        held = set(names)
        for adsorbate in self.question.adsorbates:
            states = model.predict_surfaces(
                pd.DataFrame({"material": names, "adsorbate": adsorbate})
            )["record_state"]
            held &= {n for n, s in zip(names, states, strict=True) if s in _TABULATED}
        out = [n for n in names if n not in held]
        reasons = pd.DataFrame({"material": out, "reason": _UNMEASURED})
        if not held:
            raise NothingQualifiesError(
                explain("no metal is left", where="candidates.unmeasured", found=_UNMEASURED)
            )
        kept = chosen[chosen["material"].isin(held)].reset_index(drop=True)
        return kept, pd.concat([refused, reasons], ignore_index=True)

    def score(self, model: AdsorptionModel, grid: pd.DataFrame) -> pd.DataFrame:
        """Return energies, chance, sites in the window and relative volcano activity."""
        return score_particles(model, grid, self.question, self.specification.seed)

    def order(self, scored: pd.DataFrame) -> tuple[pd.DataFrame, list[bool]]:
        """Sort by relative volcano activity per mass, or metals by chance and sizes by sites."""
        keys = scored[["material", "shape", "diameter_nm"]].copy()
        if self.question.volcano:
            activity = np.maximum(scored["relative_volcano_activity_per_mass"], 1e-300)
            keys.insert(0, "activity", np.log10(activity).round(6))
            keys.insert(1, "chance", scored["chance_in_window"].round(9))
            return keys, [False, False, True, True, True]
        sites = scored["sites_in_window_umol_per_g"].round(6)
        richest = sites.groupby(scored["material"]).idxmax()
        chance = scored["chance_in_window"].loc[richest].set_axis(richest.index)
        keys.insert(0, "chance", scored["material"].map(chance).round(9))
        keys.insert(2, "sites", sites)
        return keys, [False, True, False, True, True]

    def finish(
        self,
        best: pd.DataFrame,
        model: AdsorptionModel,  # noqa: ARG002 - the form that tracks share
    ) -> pd.DataFrame:
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

    def sections(
        self,
        result: "RankResult",
        evidence: pd.DataFrame,  # noqa: ARG002 - the form that tracks share
    ) -> Sections:
        """Return the parts of the report on metal particles."""
        from screening.reporting.catalyst_sections import (  # noqa: PLC0415 - figures load slowly
            catalyst_sections,
        )

        return catalyst_sections(result)
