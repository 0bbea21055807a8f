"""Limits that follow from the composition: hazard, restricted substances, supply, price."""

from collections.abc import Callable, Mapping
from math import isnan, nan

import numpy as np
import pandas as pd

from features.density import crystal_density_g_cm3
from features.formula import parse_formula
from features.hazards import (
    RohsShare,
    cautions_for,
    exemptions_running,
    rohs_mass_fractions,
)
from features.mass_shares import core_mass_share
from features.supply import supply_figures
from screening.covariance import FloatArray
from screening.limit_check import Check, by_material, by_material_and_size
from screening.limit_rules import Limits, Shell

__all__ = ["composition_checks"]


def composition_checks() -> dict[str, Callable[[pd.DataFrame, Limits], Check]]:
    """Return the checks on composition by the limit's name."""
    return {
        "highest_hazard_class": _hazard,
        "restricted_substances": _restricted,
        "highest_supply_class": _supply,
        "highest_price_class": _price,
    }


def _amounts(material: str) -> dict[str, float]:
    return dict(parse_formula(material).amounts)


def _hazard(frame: pd.DataFrame, limits: Limits) -> Check:
    highest = limits.highest_hazard_class or 4

    def ask(material: str) -> tuple[float, str]:
        cautions = cautions_for(_amounts(material))
        worst = cautions[0]
        words = f"hazard class {worst.hazard_class} of 4 ({worst.short_text}), allowed {highest}"
        if worst.hazard_class > highest:
            return 0.0, words
        unknown = [c.subject for c in cautions if c.regulation_status_with_date.startswith("no st")]
        if unknown and highest < 4:
            return nan, f"{', '.join(unknown)}: no hazard on record, which is no clearance"
        return 1.0, words

    return by_material(frame, "highest_hazard_class", ask)


def _supply(frame: pd.DataFrame, limits: Limits) -> Check:
    highest = limits.highest_supply_class or 4

    def ask(material: str) -> tuple[float, str]:
        figures = supply_figures(_amounts(material))
        critical = " ".join(sorted({*figures.eu_critical, *figures.us_critical})) or "none"
        words = f"supply class {figures.supply_class} of 4 (critical: {critical}; {figures.years})"
        return _within(figures.supply_class, highest, figures.without_figures, words)

    return by_material(frame, "highest_supply_class", ask)


def _price(frame: pd.DataFrame, limits: Limits) -> Check:
    highest = limits.highest_price_class or 5

    def ask(material: str) -> tuple[float, str]:
        figures = supply_figures(_amounts(material))
        words = f"price class {figures.worst_price_class} of 5 ({figures.years})"
        return _within(figures.worst_price_class, highest, figures.without_figures, words)

    return by_material(frame, "highest_price_class", ask)


def _within(found: int, highest: int, without: tuple[str, ...], words: str) -> tuple[float, str]:
    """Return the verdict of a class; elements without figures can only make it worse."""
    if found > highest:
        return 0.0, f"{words}, allowed {highest}"
    if without:
        return nan, f"no figures for {' '.join(without)}"
    return 1.0, f"{words}, allowed {highest}"


def _restricted(frame: pd.DataFrame, limits: Limits) -> Check:
    def ask(material: str, diameter_nm: FloatArray) -> tuple[FloatArray, Callable[[int], str]]:
        core = rohs_mass_fractions(_amounts(material))
        if limits.shell is None:
            share = {
                name: np.full(len(diameter_nm), one.mass_percent) for name, one in core.items()
            }
            return _judged(core, share, limits)
        coat = rohs_mass_fractions(_amounts(limits.shell.material))
        if not any(one.mass_percent > 0.0 for one in (*core.values(), *coat.values())):
            return _same(1.0, "no restricted element in core or shell", len(diameter_nm))
        of_core = _core_share(material, limits.shell, diameter_nm)
        if isinstance(of_core, str):
            return _same(nan, of_core, len(diameter_nm))
        share = {
            name: core[name].mass_percent * of_core + coat[name].mass_percent * (1.0 - of_core)
            for name in core
        }
        return _judged(core, share, limits)

    return by_material_and_size(frame, "restricted_substances", ask)


def _same(chance: float, words: str, n_rows: int) -> tuple[FloatArray, Callable[[int], str]]:
    return np.full(n_rows, chance), lambda _: words


def _core_share(material: str, shell: Shell, diameter_nm: FloatArray) -> FloatArray | str:
    """Return the core's share of the particle's mass, or which density is missing."""
    core_density = shell.core_density_g_cm3 or crystal_density_g_cm3(material)
    shell_density = shell.density_g_cm3 or crystal_density_g_cm3(shell.material)
    if isnan(core_density) or isnan(shell_density):
        which = material if isnan(core_density) else shell.material
        return f"no density on record for {which}; give it in limits.shell"
    return core_mass_share(diameter_nm, shell.thickness_nm, core_density, shell_density)


def _judged(
    core: Mapping[str, RohsShare], share: Mapping[str, FloatArray], limits: Limits
) -> tuple[FloatArray, Callable[[int], str]]:
    """Return verdicts of mass shares, in percent, against the limits of the elements."""
    over = {name: share[name] > one.limit_mass_percent for name, one in core.items()}
    running = {
        name: exemptions_running(name, limits.exemptions_on) if limits.exemptions_on else ()
        for name in core
    }
    exceeds = np.any(list(over.values()), axis=0)
    barred = np.any([over[name] for name in core if not running[name]], axis=0)
    chance = np.where(barred, 0.0, np.where(exceeds, nan, 1.0))

    def say(at: int) -> str:
        names = [name for name in core if over[name][at]]
        if not names:
            return "no restricted element above its limit in the particle"
        facts = ", ".join(
            f"{core[name].restricted_form} {share[name][at]:.3g} % by mass, limit "
            f"{core[name].limit_mass_percent:g} % ({core[name].limit_date})"
            for name in names
        )
        if barred[at]:
            return facts
        exempt = "; ".join(text for name in names for text in running[name])
        return f"{facts}; may be exempt: {exempt}; the law in force decides"

    return chance, say
