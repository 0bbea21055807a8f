"""What the two tracks, emission and catalysis, hand to the one mechanism that ranks and writes.

The mechanism (`screening.ranking`, `screening.running`, `screening.reporting.report`) refuses,
orders, cuts and writes; a track says what its candidates are, how they are scored and shown.
"""

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Protocol

import pandas as pd

if TYPE_CHECKING:
    from screening.ranking import RankResult
    from screening.specification import Specification

__all__ = ["Sections", "Track", "track_of"]


@dataclass(frozen=True)
class Sections:
    """What a track adds to the skeleton of the report.

    Parameters
    ----------
    template : str
        File of `screening.reporting` that fills the skeleton's blocks.
    values : dict of str to Any
        For the template.
    """

    template: str
    values: dict[str, Any]


class Track(Protocol):
    """One kind of candidate.

    Attributes
    ----------
    columns : tuple of str
        Columns of the shortlist, in order.
    brief : dict of str to int
        Columns of the table on the terminal and their digits.
    """

    columns: tuple[str, ...]
    brief: dict[str, int]

    def check(self, specification: "Specification") -> None:
        """Refuse what cannot be ranked, before a model is trained for it."""

    def model(self, specification: "Specification") -> Any:
        """Return the trained model."""

    def model_hash(self, specification: "Specification") -> str:
        """Return the hash of all that the model follows from."""

    def candidates(
        self, specification: "Specification", model: Any
    ) -> tuple[pd.DataFrame, pd.DataFrame]:
        """Return the grid of candidates, and the refused materials with reasons."""

    def score(self, specification: "Specification", model: Any, grid: pd.DataFrame) -> pd.DataFrame:
        """Return the grid with every score, chance_in_window among them."""

    def order(self, scored: pd.DataFrame) -> tuple[pd.DataFrame, list[bool]]:
        """Return the keys that sort candidates, rounded so that ties tie, and which ones rise."""

    def finish(self, best: pd.DataFrame, model: Any) -> pd.DataFrame:
        """Return listed rows with nearest_source and cautions."""

    def warnings(self, result: "RankResult") -> list[str]:
        """Say what a reader should know before acting."""

    def draw(self, result: "RankResult", ax: Any) -> Any:
        """Draw the candidates against size."""

    def sections(self, result: "RankResult", evidence: pd.DataFrame) -> Sections:
        """Return the track's parts of the report."""


def track_of(specification: "Specification") -> Track:
    """Return the track that a specification's target belongs to."""
    from screening.surface_target import SurfaceTarget  # noqa: PLC0415 - each track loads its own

    if isinstance(specification.target, SurfaceTarget):
        from screening.catalyst_track import CatalystTrack  # noqa: PLC0415 - as above

        return CatalystTrack(specification)
    from screening.emission_track import EmissionTrack  # noqa: PLC0415 - as above

    return EmissionTrack()
