"""Limits that follow from the composition: hazard, restricted substances, supply, price."""

from collections.abc import Callable
from functools import partial
from math import isnan, nan

import numpy as np
import pandas as pd

from features.density import crystal_density_g_cm3
from features.formula import parse_formula
from features.hazards import cautions_for, exemptions_running, rohs_mass_fractions
from features.mass_shares import core_shell_composition
from features.supply import supply_figures
from screening.limit_check import Check, by_material
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
    if limits.shell is None:
        ask = partial(_shares_words, limits=limits)
        return by_material(
            frame, "restricted_substances", lambda name: ask(composition=_amounts(name))
        )
    return _restricted_with_shell(frame, limits, limits.shell)


def _restricted_with_shell(frame: pd.DataFrame, limits: Limits, shell: Shell) -> Check:
    """Ask once a material and size: the shell's share of the mass falls with the size."""
    pairs = list(zip(frame["material"], frame["diameter_nm"].astype(float), strict=True))
    codes, unique = pd.factorize(pd.Series(pairs, dtype=object))
    answers = [_shelled(str(name), float(size), limits, shell) for name, size in unique]
    chance = np.array([chance for chance, _ in answers], dtype=np.float64)[codes]
    return Check("restricted_substances", chance, lambda at: answers[codes[at]][1])


def _shelled(material: str, diameter_nm: float, limits: Limits, shell: Shell) -> tuple[float, str]:
    both = {**_amounts(material), **_amounts(shell.material)}
    if not any(share.mass_percent > 0.0 for share in rohs_mass_fractions(both).values()):
        return 1.0, "no restricted element in core or shell"
    core_density = shell.core_density_g_cm3 or crystal_density_g_cm3(material)
    shell_density = shell.density_g_cm3 or crystal_density_g_cm3(shell.material)
    if isnan(core_density) or isnan(shell_density):
        which = material if isnan(core_density) else shell.material
        return nan, f"no density on record for {which}; give it in limits.shell"
    composition = core_shell_composition(
        _amounts(material),
        _amounts(shell.material),
        core_diameter_nm=diameter_nm,
        shell_thickness_nm=shell.thickness_nm,
        core_density_g_cm3=core_density,
        shell_density_g_cm3=shell_density,
    )
    return _shares_words(limits=limits, composition=composition)


def _shares_words(*, limits: Limits, composition: dict[str, float]) -> tuple[float, str]:
    over = [share for share in rohs_mass_fractions(composition).values() if share.exceeds]
    if not over:
        return 1.0, "no restricted element above its limit in the particle"
    facts = ", ".join(
        f"{share.restricted_form} {share.mass_percent:.3g} % by mass, limit "
        f"{share.limit_mass_percent:g} % ({share.limit_date})"
        for share in over
    )
    if limits.exemptions_on is not None:
        running = {
            share.element: exemptions_running(share.element, limits.exemptions_on) for share in over
        }
        if all(running.values()):
            words = "; ".join(text for texts in running.values() for text in texts)
            return nan, f"{facts}; may be exempt: {words}; the law in force decides"
    return 0.0, facts
