"""The ``[limits]`` table of a specification: what a candidate must meet besides its target."""

from datetime import date
from typing import Annotated, Literal, Self

from pydantic import Field, model_validator

from screening.strict_part import StrictPart

__all__ = ["METAL_LIMITS", "OPTICAL_LIMITS", "Limits", "Shell"]

METAL_LIMITS = ("metallic", "superparamagnetic")
"""Limits that make no sense where the target is an optical one."""
OPTICAL_LIMITS = ("highest_fwhm_meV", "least_size_tolerance_nm")
"""Limits that need an optical target."""

Required = Literal["required", "excluded"]
Span = Annotated[list[float], Field(min_length=2, max_length=2)]


class Shell(StrictPart):
    """A shell on the particle; counts in mass shares only."""

    material: str = Field(min_length=1, max_length=200, description="formula of the shell")
    thickness_nm: float = Field(gt=0.0, le=50.0, description="thickness, nm")
    density_g_cm3: float | None = Field(
        default=None, gt=0.1, le=25.0, description="density; from the lattice if left out"
    )
    core_density_g_cm3: float | None = Field(
        default=None, gt=0.1, le=25.0, description="density of every core; likewise"
    )


class Limits(StrictPart):
    """Practical limits; each is passed, failed or unsure, with a chance and a reason.

    A limit passes at a chance of at least ``sure_at`` and fails at 1 - ``sure_at`` or less;
    temperature limits use the margin in sigmas instead.
    """

    diameter_nm: Span | None = Field(
        default=None, description="smallest and largest diameter that can be made, nm"
    )
    highest_fwhm_meV: float | None = Field(
        default=None, gt=0.0, le=5000.0, description="highest ensemble linewidth, meV"
    )
    least_size_tolerance_nm: float | None = Field(
        default=None, ge=0.0, le=20.0, description="least room for a drift of the diameter, nm"
    )
    highest_hazard_class: int | None = Field(
        default=None, ge=1, le=4, description="1 no code on record ... 4 fatal or carcinogen"
    )
    restricted_substances: bool = Field(
        default=False, description="mass limits for Cd, Pb, Hg and Cr as in EU directive 2011/65"
    )
    exemptions_on: date | None = Field(
        default=None, description="count exemptions on record that still run on this day"
    )
    shell: Shell | None = Field(default=None, description="shell counted in mass shares")
    highest_supply_class: int | None = Field(
        default=None, ge=1, le=4, description="1 on no list of critical materials ... 4 on all"
    )
    highest_price_class: int | None = Field(
        default=None, ge=1, le=5, description="1 below 10 US dollars a kg ... 5 above 10,000"
    )
    operating_temperature_K: float | None = Field(
        default=None, gt=0.0, le=4000.0, description="the particle must survive it"
    )
    survive: Literal["melting", "sintering"] = Field(
        default="sintering", description="below the melting or the Tammann temperature"
    )
    margin_sigmas: float = Field(
        default=1.0, ge=0.0, le=6.0, description="margin of the temperature limit, in sigmas"
    )
    metallic: Required | None = Field(default=None, description="metallic state")
    superparamagnetic: Required | None = Field(
        default=None, description="superparamagnetic at the operating temperature, else 298 K"
    )
    measurement_time_s: float = Field(
        default=100.0, gt=1e-9, le=1e10, description="time over which moments may flip, s"
    )
    sure_at: float = Field(
        default=0.9, gt=0.5, lt=1.0, description="chance from which a limit counts as passed"
    )
    unsure: Literal["keep", "reject"] = Field(
        default="keep", description="what becomes of candidates that are unsure"
    )

    @model_validator(mode="after")
    def _consistent(self) -> Self:
        if self.diameter_nm is not None and not 0.0 < self.diameter_nm[0] <= self.diameter_nm[1]:
            raise ValueError(
                f"diameter_nm out of range: expected 0 < low <= high, found {self.diameter_nm}"
            )
        if self.exemptions_on is not None and not self.restricted_substances:
            raise ValueError("exemptions_on needs restricted_substances = true")
        if self.shell is not None and not self.restricted_substances:
            raise ValueError("shell counts in mass shares only: add restricted_substances = true")
        return self

    def asked(self) -> list[str]:
        """Return the names of the limits that are set."""
        plain = Limits()
        settings = {"survive", "margin_sigmas", "measurement_time_s", "sure_at", "unsure"}
        settings |= {"exemptions_on", "shell"}
        return [
            name
            for name in type(self).model_fields
            if name not in settings and getattr(self, name) != getattr(plain, name)
        ]
