"""Targets of the catalyst track: an adsorbate and a window, or a reaction with a known optimum.

Energies in eV against the adsorbate's common reference (`features.adsorption`); negative binds.
"""

from collections.abc import Mapping
from typing import TYPE_CHECKING, Annotated, Any, Literal, Self

from pydantic import Field, model_validator

from screening.strict_part import StrictPart

if TYPE_CHECKING:
    from screening.volcano import SurfaceQuestion

__all__ = ["SURFACE_QUANTITIES", "SurfaceTarget", "target_kind"]

SURFACE_QUANTITIES = ("adsorption_energy", "adsorption_free_energy")

_LOWEST_eV, _HIGHEST_eV = -10.0, 10.0


class SurfaceTarget(StrictPart):
    """What the sites of metal particles must do.

    Either ``reaction`` alone, or ``quantity``, ``adsorbate`` and ``window_eV``.
    """

    quantity: Literal["adsorption_energy", "adsorption_free_energy"] = Field(
        default="adsorption_energy", description="energy, or free energy at 298 K and 1 bar"
    )
    adsorbate: str | None = Field(default=None, description="such as H, O, OH, N, CO")
    window_eV: Annotated[list[float], Field(min_length=2, max_length=2)] | None = Field(
        default=None, description="energies, eV, -10 to 10; negative binds"
    )
    reaction: str | None = Field(default=None, description="a reaction of the table `reactions`")

    @model_validator(mode="after")
    def _one_question(self) -> Self:
        if self.reaction is not None:
            others = {"quantity", "adsorbate", "window_eV"} & self.model_fields_set
            if others:
                raise ValueError(
                    "a reaction sets its own adsorbates and window: leave out "
                    + ", ".join(sorted(others))
                )
            return self
        if self.adsorbate is None or self.window_eV is None:
            raise ValueError("expected adsorbate and window_eV together, or reaction alone")
        low, high = self.window_eV
        if not low < high:
            raise ValueError(
                f"the window is upside down: expected low < high, found {self.window_eV}"
            )
        if not _LOWEST_eV <= low < high <= _HIGHEST_eV:
            raise ValueError(
                f"window_eV out of range: expected {_LOWEST_eV:g} to {_HIGHEST_eV:g} eV, "
                f"found {self.window_eV}"
            )
        return self

    @property
    def question(self) -> "SurfaceQuestion":
        """What is asked of a site.

        Raises
        ------
        SpecificationError
            If the reaction or adsorbate is unknown, or has no free-energy correction.
        """
        from screening.volcano import question_of  # noqa: PLC0415 - reads tables

        return question_of(self)

    @property
    def energies_eV(self) -> tuple[float, float]:
        """Window of the quantity or of the reaction's descriptor, eV, low before high."""
        return self.question.window_eV


def target_kind(target: Any) -> str:
    """Tell which track a target belongs to by its keys.

    Examples
    --------
    >>> target_kind({"window_nm": [625, 635]}), target_kind({"reaction": "hydrogen evolution"})
    ('emission', 'surface')
    """
    if isinstance(target, SurfaceTarget):
        return "surface"
    if not isinstance(target, Mapping):
        return "emission"
    asks = target.get("quantity") in SURFACE_QUANTITIES or {"adsorbate", "reaction"} & set(target)
    return "surface" if asks else "emission"
