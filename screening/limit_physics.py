"""Limits that follow from the physics of small particles: melting, sintering, metal, magnet."""

from collections.abc import Callable
from math import nan

import numpy as np
import pandas as pd
from scipy.special import ndtr

from features.errors import PhysicsRangeError, UnknownMaterialError
from features.formula import parse_formula
from features.metallicity import metallic_estimate
from features.stability import melting_estimate, sintering_temperatures_K, thermo_constants
from features.stability_magnetic import superparamagnetic_chance, superparamagnetic_estimate
from features.stability_scorecard import melting_discrepancy
from screening.covariance import FloatArray
from screening.limit_check import Check, by_material_and_size
from screening.limit_rules import Limits

__all__ = ["physics_checks"]

_ROOM_K = 298.15
_MAGNETIC = frozenset(
    {"Cr", "Mn", "Fe", "Co", "Ni", "Gd", "Tb", "Dy", "Ho", "Er", "Tm", "Nd", "Sm"}
)


def physics_checks() -> dict[str, Callable[[pd.DataFrame, Limits], Check]]:
    """Return the checks on physics by the limit's name."""
    return {
        "operating_temperature_K": _survival,
        "metallic": _metallic,
        "superparamagnetic": _superparamagnetic,
    }


def _nothing(n_rows: int, words: str) -> tuple[FloatArray, Callable[[int], str]]:
    return np.full(n_rows, nan), lambda _: words


def _amounts(material: str) -> dict[str, float]:
    return dict(parse_formula(material).amounts)


def _survival(frame: pd.DataFrame, limits: Limits) -> Check:
    operating = limits.operating_temperature_K or _ROOM_K
    share, reference_nm = melting_discrepancy()

    def ask(material: str, diameter_nm: FloatArray) -> tuple[FloatArray, Callable[[int], str]]:
        try:
            estimate = melting_estimate(_amounts(material), diameter_nm)
            bulk_K = thermo_constants(_amounts(material))["melting_temperature_K"]
        except UnknownMaterialError:
            return _nothing(len(diameter_nm), "no melting constants on record")
        off_K = share * bulk_K * np.minimum(1.0, reference_nm / diameter_nm)
        limit_K, sigma_K = estimate.temperature_K, np.hypot(estimate.sigma_K, off_K)
        if limits.survive == "sintering":
            # 0.5 of the melting temperature, and of its uncertainty
            limit_K, sigma_K = sintering_temperatures_K(np.maximum(limit_K, 1.0))[1], sigma_K / 2.0
        chance = np.where(estimate.is_valid, ndtr((limit_K - operating) / sigma_K), nan)

        def say(at: int) -> str:
            if not estimate.is_valid[at]:
                return f"{diameter_nm[at]:g} nm: below about 200 atoms no melting model holds"
            name = "melting" if limits.survive == "melting" else "Tammann temperature"
            return (
                f"{name} {limit_K[at]:.0f} +/- {sigma_K[at]:.0f} K at {diameter_nm[at]:g} nm "
                f"against {operating:g} K in operation"
            )

        return chance, say

    return by_material_and_size(frame, "operating_temperature_K", ask, in_sigmas=True)


def _metallic(frame: pd.DataFrame, limits: Limits) -> Check:
    temperature_K = limits.operating_temperature_K or _ROOM_K
    wanted = limits.metallic == "required"

    def ask(material: str, diameter_nm: FloatArray) -> tuple[FloatArray, Callable[[int], str]]:
        try:
            chances = [
                metallic_estimate(symbol, diameter_nm, temperature_K=temperature_K).chance
                for symbol in _amounts(material)
            ]
        except UnknownMaterialError:
            return _nothing(len(diameter_nm), "no free-electron constants on record")
        chance = np.min(chances, axis=0)
        return (
            chance if wanted else 1.0 - chance,
            lambda at: f"metallic with a chance of {chance[at]:.2f} at {diameter_nm[at]:g} nm",
        )

    return by_material_and_size(frame, "metallic", ask)


def _superparamagnetic(frame: pd.DataFrame, limits: Limits) -> Check:
    temperature_K = limits.operating_temperature_K or _ROOM_K
    wanted = limits.superparamagnetic == "required"

    def ask(material: str, diameter_nm: FloatArray) -> tuple[FloatArray, Callable[[int], str]]:
        if not _MAGNETIC & set(_amounts(material)):
            # common practice: magnetic order needs an open 3d or 4f shell
            words = "holds no element that orders magnetically"
            return np.full(len(diameter_nm), 0.0 if wanted else 1.0), lambda _: words
        try:
            estimate = superparamagnetic_estimate(
                material,
                temperature_K=temperature_K,
                measurement_time_s=limits.measurement_time_s,
            )
        except UnknownMaterialError:
            return _nothing(len(diameter_nm), "no magnetic constants on record")
        except PhysicsRangeError as error:
            message = str(error)
            return np.full(len(diameter_nm), 0.0 if wanted else 1.0), lambda _: message
        chance = superparamagnetic_chance(diameter_nm, estimate)
        return (
            chance if wanted else 1.0 - chance,
            lambda at: (
                f"superparamagnetic up to {estimate.diameter_nm:.1f} to "
                f"{estimate.barrier_diameter_nm:.1f} nm at {temperature_K:g} K, here "
                f"{diameter_nm[at]:g} nm"
            ),
        )

    return by_material_and_size(frame, "superparamagnetic", ask)
