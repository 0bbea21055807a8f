"""Scores of metal particles: sites in the window, chance, relative volcano activity.

Every kind of site of a particle gets a descriptor with its errors (`screening.site_levels`); the
intervals of sums over sites come from deterministic draws of these errors, so the errors that
sites share are shared there too. Amounts per gram of metal, and per square metre of metal surface
(surface atoms times the area of an atom in the close-packed plane, as adsorption measures it).
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import pandas as pd
from scipy.special import ndtr

from screening.adsorption import AdsorptionModel
from screening.adsorption_answers import NORMAL_90
from screening.catalyst_sites import ParticleSites, particle_sites
from screening.covariance import FloatArray
from screening.site_levels import Draws, SiteLevel, site_level
from screening.volcano import SurfaceQuestion

__all__ = ["REFERENCE_PARTICLE", "score_particles"]

REFERENCE_PARTICLE = ("Pt", "truncated_octahedron", 3.0)
"""Particle to which relative volcano activities refer: metal, shape, diameter in nm."""

_SIZES_AT_ONCE = 64


@dataclass(frozen=True)
class _Descriptors:
    """Descriptors of sites: means, the normal errors of a single site, and draws."""

    centre: FloatArray
    slope_sd: FloatArray
    own_sd: FloatArray
    draws: FloatArray


def _descriptors(
    sites: ParticleSites, level: SiteLevel, question: SurfaceQuestion, draws: Draws
) -> _Descriptors:
    """Return the descriptor of every size, column and draw."""
    if question.is_step:
        shift, slope_sd, own_sd = (np.zeros_like(sites.n_sites) for _ in range(3))
    else:
        shift, slope_sd, own_sd = level.shift_eV(sites.coordination)
    slope = draws.named(f"slope {level.material}")
    own = np.stack([draws.named(f"{level.structure} {name}") for name in sites.names])
    common = level.error_eV - level.reference_error_eV
    common = common + question.shared_sd_eV * draws.named("shared")
    centre = level.descriptor_eV + shift
    drawn = centre[:, :, None] + common + slope_sd[:, :, None] * slope
    return _Descriptors(centre, slope_sd, own_sd, drawn + own_sd[:, :, None] * own)


def _chance(found: _Descriptors, level: SiteLevel, question: SurfaceQuestion) -> FloatArray:
    """Return each site's chance: normal errors in closed form about draws of the metal's own."""
    low, high = question.window_eV
    sd = np.hypot(found.slope_sd, found.own_sd)
    sd = np.hypot(sd, max(question.shared_sd_eV, 1e-6))
    mean = found.centre[:, :, None] + (level.error_eV - level.reference_error_eV)
    inside = ndtr((high - mean) / sd[:, :, None]) - ndtr((low - mean) / sd[:, :, None])
    return np.asarray(inside.mean(axis=2))


def _quantiles(values: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    low, middle, high = np.quantile(values, [0.05, 0.5, 0.95], axis=1)
    return low, middle, high


def _activity(found: _Descriptors, sites: ParticleSites, question: SurfaceQuestion) -> FloatArray:
    """Return the draws of the summed relative volcano activity of a particle's sites."""
    per_site = 10.0 ** question.relative_activity_log10(found.draws)
    return np.asarray(np.einsum("sc,scd->sd", sites.n_sites, per_site))


def _by_kind(sites: ParticleSites, weights: FloatArray) -> tuple[list[str], FloatArray]:
    """Return the kinds of site, and weights summed over the columns of each."""
    kinds = list(dict.fromkeys(sites.names))
    column = np.array([kinds.index(name) for name in sites.names])
    member = (column[:, None] == np.arange(len(kinds))).astype(np.float64)
    return kinds, weights @ member


def _best_kind(
    sites: ParticleSites, chance: FloatArray, found: _Descriptors
) -> dict[str, FloatArray | list[str]]:
    """Describe the kind of site that holds most of the sites expected in the window."""
    kinds, n = _by_kind(sites, sites.n_sites)
    inside = _by_kind(sites, sites.n_sites * chance)[1]
    best = np.argmax(inside + 1e-12 * n, axis=1)
    at = (np.arange(len(best)), best)
    n = np.maximum(n, 1e-9)

    def mean(values: FloatArray) -> FloatArray:
        return np.asarray(_by_kind(sites, sites.n_sites * values)[1][at] / n[at])

    return {
        "best_site": [kinds[i] for i in best],
        "best_site_share": n[at] / sites.n_surface,
        "chance_in_window": np.clip(inside[at] / n[at], 0.0, 1.0),
        "descriptor_eV": mean(found.centre),
        "site_sd_eV": mean(np.hypot(found.slope_sd, found.own_sd)),
    }


def _energies(frame: pd.DataFrame, level: SiteLevel, question: SurfaceQuestion) -> pd.DataFrame:
    """Add the adsorption energy of the best site, its free energy and the descriptor's interval."""
    shift = frame["descriptor_eV"] - level.descriptor_eV
    frame["adsorption_energy_eV"] = level.energy_eV + shift
    half = np.hypot(level.energy_half_eV, NORMAL_90 * frame["site_sd_eV"])
    frame["adsorption_energy_low_eV"] = frame["adsorption_energy_eV"] - half
    frame["adsorption_energy_high_eV"] = frame["adsorption_energy_eV"] + half
    correction = question.correction_eV
    frame["adsorption_free_energy_eV"] = frame["adsorption_energy_eV"] + (
        np.nan if correction is None else correction
    )
    errors = np.sort(level.error_eV - level.reference_error_eV)
    common = 0.5 * float(np.quantile(errors, 0.95) - np.quantile(errors, 0.05))
    wide = np.hypot(common, NORMAL_90 * np.hypot(frame["site_sd_eV"], question.shared_sd_eV))
    frame["descriptor_low_eV"] = frame["descriptor_eV"] - wide
    frame["descriptor_high_eV"] = frame["descriptor_eV"] + wide
    return frame.assign(
        record_state=level.record_state,
        nearest_source=level.nearest_source,
        adsorbate=question.label,
    )


@dataclass(frozen=True)
class _Reference:
    """Draws of the reference particle's relative volcano activity."""

    per_mass: FloatArray
    per_area: FloatArray


def _reference(model: AdsorptionModel, question: SurfaceQuestion, draws: Draws) -> _Reference:
    material, shape, diameter = REFERENCE_PARTICLE
    sites = particle_sites(material, shape, np.array([diameter]), is_step=question.is_step)
    found = _descriptors(sites, site_level(model, material, question, draws), question, draws)
    total = _activity(found, sites, question)[0]
    return _Reference(total * sites.umol_per_g[0], total * sites.umol_per_m2[0])


def _relative_activity(
    sites: ParticleSites, found: _Descriptors, question: SurfaceQuestion, reference: _Reference
) -> dict[str, FloatArray]:
    total = _activity(found, sites, question)
    columns = {}
    for per, unit, own in (
        ("mass", sites.umol_per_g, reference.per_mass),
        ("area", sites.umol_per_m2, reference.per_area),
    ):
        low, middle, high = _quantiles(total * unit[:, None] / own)
        columns[f"relative_volcano_activity_per_{per}"] = middle
        columns[f"relative_volcano_activity_low_per_{per}"] = low
        columns[f"relative_volcano_activity_high_per_{per}"] = high
    return columns


def _block(
    sites: ParticleSites,
    level: SiteLevel,
    question: SurfaceQuestion,
    draws: Draws,
    reference: _Reference | None,
) -> pd.DataFrame:
    """Score the sizes of one metal and shape."""
    found = _descriptors(sites, level, question, draws)
    chance = _chance(found, level, question)
    frame = pd.DataFrame(_best_kind(sites, chance, found))
    frame["atoms"], frame["dispersion"] = sites.n_atoms, sites.n_surface / sites.n_atoms
    frame = frame.assign(**_in_window(sites, found, chance, question))
    if reference is not None:
        frame = frame.assign(**_relative_activity(sites, found, question, reference))
    return frame


def _in_window(
    sites: ParticleSites, found: _Descriptors, chance: FloatArray, question: SurfaceQuestion
) -> dict[str, FloatArray]:
    low, high = question.window_eV
    inside = (found.draws >= low) & (found.draws <= high)
    spread = _quantiles(np.einsum("sc,scd->sd", sites.n_sites, inside.astype(np.float64)))
    expected = (sites.n_sites * chance).sum(axis=1)
    columns = {}
    for per, unit in (("umol_per_g", sites.umol_per_g), ("umol_per_m2", sites.umol_per_m2)):
        columns[f"sites_in_window_{per}"] = expected * unit
        columns[f"sites_in_window_low_{per}"] = spread[0] * unit
        columns[f"sites_in_window_high_{per}"] = spread[2] * unit
    return columns


def _slices(sites: ParticleSites) -> Iterator[ParticleSites]:
    """Yield the sizes in parts, so that draws of all sites fit into memory."""
    for start in range(0, len(sites.n_atoms), _SIZES_AT_ONCE):
        yield sites.part(slice(start, start + _SIZES_AT_ONCE))


def score_particles(
    model: AdsorptionModel, grid: pd.DataFrame, question: SurfaceQuestion, seed: int = 0
) -> pd.DataFrame:
    """Score particles.

    Parameters
    ----------
    model : AdsorptionModel
        Fitted.
    grid : pandas.DataFrame
        Columns material, structure, shape, diameter_nm.
    question : SurfaceQuestion
    seed : int, default 0
        Of the draws behind the intervals.

    Returns
    -------
    pandas.DataFrame
        The grid with what `screening.catalyst_track.COLUMNS` names, one row a candidate in the
        order given.
    """
    draws = Draws(seed)
    levels = {m: site_level(model, m, question, draws) for m in grid["material"].unique()}
    reference = _reference(model, question, draws) if question.volcano else None
    parts = []
    for (material, shape), rows in grid.groupby(["material", "shape"], sort=False):
        sizes = rows["diameter_nm"].to_numpy(dtype=np.float64)
        sites = particle_sites(str(material), str(shape), sizes, is_step=question.is_step)
        level = levels[material]
        frames = [_block(part, level, question, draws, reference) for part in _slices(sites)]
        frame = _energies(pd.concat(frames, ignore_index=True), level, question)
        parts.append(frame.set_index(rows.index))
    return grid.join(pd.concat(parts))
