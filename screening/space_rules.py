"""The ``[[candidates.spaces]]`` tables of a specification: compositions to enumerate."""

from typing import Annotated, Self

from pydantic import Field, model_validator

from features.composition_space import CompositionSpace, Sublattice
from features.errors import FewnmError
from screening.strict_part import StrictPart

__all__ = ["Site", "Space"]

Symbol = Annotated[str, Field(pattern=r"^([A-Z][a-z]?|FA|MA)$")]
Shares = Annotated[list[float], Field(min_length=2, max_length=2)]


class Site(StrictPart):
    """One sublattice."""

    elements: list[Symbol] = Field(min_length=1, max_length=60, description="element symbols")
    atoms: float | None = Field(
        default=None, gt=0.0, le=100.0, description="atoms a formula unit; free if left out"
    )


class Space(StrictPart):
    """Charge-balanced compositions of some elements.

    Either ``cations`` and ``anions``, whose ratio follows from charge balance, or ``sites`` with
    their numbers of atoms, the anions last.
    """

    cations: list[Symbol] = Field(default_factory=list, max_length=60, description="cations")
    anions: list[Symbol] = Field(default_factory=list, max_length=20, description="anions")
    sites: list[Site] = Field(
        default_factory=list, max_length=6, description="sublattices, the anions last"
    )
    step_percent: float = Field(
        default=10.0, ge=0.5, le=100.0, description="step of the shares; divides 100"
    )
    most_mixed: int = Field(
        default=2, ge=1, le=5, description="most elements of one sublattice at once"
    )
    ranges: dict[Symbol, Shares] = Field(
        default_factory=dict, description="lowest and highest share of an element, 0 to 1"
    )
    anions_per_cation: float | None = Field(
        default=None, gt=0.0, le=10.0, description="keep only this ratio, such as 1 for ZnS"
    )
    on_record: bool = Field(
        default=True, description="only solid solutions of materials in the tables"
    )

    @model_validator(mode="after")
    def _can_be_enumerated(self) -> Self:
        listed = bool(self.cations) and bool(self.anions)
        if listed == bool(self.sites) or (self.sites and (self.cations or self.anions)):
            raise ValueError("expected cations and anions, or sites, exactly one of the two")
        known = {symbol for site in self.sites for symbol in site.elements}
        known |= {*self.cations, *self.anions}
        for symbol, (low, high) in self.ranges.items():
            if symbol not in known:
                raise ValueError(f"range of {symbol}: it stands on no sublattice")
            if not 0.0 <= low <= high <= 1.0:
                raise ValueError(
                    f"range of {symbol}: expected 0 <= low <= high <= 1, found [{low}, {high}]"
                )
        try:
            self.space()
        except FewnmError as error:
            raise ValueError(str(error)) from None
        return self

    def space(self) -> CompositionSpace:
        """Return the space, ready to be enumerated."""
        ratio = self.anions_per_cation
        sites = self.sites or [
            Site(elements=self.cations, atoms=1.0),
            Site(elements=self.anions, atoms=ratio),
        ]
        return CompositionSpace(
            tuple(
                Sublattice(
                    tuple(site.elements),
                    site.atoms,
                    self.step_percent,
                    self.most_mixed,
                    {
                        symbol: (low, high)
                        for symbol, (low, high) in self.ranges.items()
                        if symbol in site.elements
                    },
                )
                for site in sites
            )
        )
