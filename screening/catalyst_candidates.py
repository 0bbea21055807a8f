"""Candidates of the catalyst track: metal or alloy x shape x diameter, with reasons for refusals."""

from typing import TYPE_CHECKING

import numpy as np
import pandas as pd

from features.adsorption_descriptors import alloy_parts, metal_descriptors
from features.errors import (
    FewnmError,
    NothingQualifiesError,
    SpecificationError,
    UnknownMaterialError,
    explain,
)
from features.formula import parse_formula
from features.particle import FEWEST_ATOMS, equivalent_diameter_nm
from features.particle_metal import MetalLattice, metal_lattice
from features.particle_shapes import available_shapes, require_shape, shape_structures
from features.particle_steps import most_step_sites
from screening.adsorption_pure import surface_adsorbates

if TYPE_CHECKING:
    from screening.specification import Candidates
    from screening.volcano import SurfaceQuestion

__all__ = ["USUAL_SHAPES", "check_adsorbates", "choose_particles", "particle_grid"]

USUAL_SHAPES = {
    "fcc": "truncated_octahedron",
    "hcp": "truncated_hexagonal_bipyramid",
    "bcc": "truncated_rhombic_dodecahedron",
}
"""Shape taken where none is named: about the equilibrium form of each structure."""

_ANY_SIZE_nm = 3.0


def check_adsorbates(question: "SurfaceQuestion") -> None:
    """Refuse adsorbates without energies on metals.

    Raises
    ------
    SpecificationError
    """
    known = surface_adsorbates()
    for adsorbate in question.adsorbates:
        if adsorbate not in known:
            raise SpecificationError(
                explain(
                    "unknown adsorbate",
                    where="target.adsorbate",
                    expected=f"one of {', '.join(known)}",
                    found=repr(adsorbate),
                )
            )


def choose_particles(
    wanted: "Candidates", question: "SurfaceQuestion"
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Return the metals and shapes of a specification and those refused, with reasons.

    Parameters
    ----------
    wanted : Candidates
    question : SurfaceQuestion

    Returns
    -------
    chosen : pandas.DataFrame
        Columns material, structure, shape.
    refused : pandas.DataFrame
        Columns material, reason, limit, verdict.

    Raises
    ------
    SpecificationError
        If a metal, alloy or shape is unknown, a shape fits none of the metals or a metal named
        none of the shapes, or the smallest diameter holds fewer than 13 atoms.
    NothingQualifiesError
        If nothing is left.
    """
    chosen: list[tuple[str, str, str]] = []
    refused: list[tuple[str, str]] = []
    for name in _named(wanted):
        excluded = sorted(set(parse_formula(name).amounts) & set(wanted.exclude_elements))
        if excluded:
            refused.append((name, f"contains excluded {', '.join(excluded)}"))
            continue
        fitting, faults = _fitting_shapes(name, wanted, question)
        if not fitting and wanted.materials:
            raise SpecificationError(f"candidates: {name}: {faults[0]}")
        structure = metal_lattice(name).structure
        chosen += [(name, structure, shape) for shape in fitting]
        refused += [(name, fault) for fault in faults]
    if not chosen:
        raise NothingQualifiesError(_nothing_left(refused))
    frame = pd.DataFrame(chosen, columns=["material", "structure", "shape"])
    _check_shapes(wanted, frame)
    _check_smallest(wanted, frame["material"].unique().tolist())
    return frame, pd.DataFrame(refused, columns=["material", "reason"]).assign(
        limit="candidates", verdict="fail"
    )


def particle_grid(chosen: pd.DataFrame, wanted: "Candidates") -> pd.DataFrame:
    """Return every chosen particle at every diameter of the specification.

    Parameters
    ----------
    chosen : pandas.DataFrame
        As from `choose_particles`.
    wanted : Candidates

    Returns
    -------
    pandas.DataFrame
        Columns material, structure, shape, diameter_nm.
    """
    low, high = wanted.diameter_nm
    steps = int(np.floor((high - low) / wanted.step_nm + 1e-9))
    diameters = np.round(low + wanted.step_nm * np.arange(steps + 1), 6)
    grid = chosen.loc[chosen.index.repeat(len(diameters))].reset_index(drop=True)
    return grid.assign(diameter_nm=np.tile(diameters, len(chosen)))


def _named(wanted: "Candidates") -> list[str]:
    """Return the metals and alloys to look at."""
    if not wanted.materials:
        return [metal for metal in metal_descriptors().index if _has_lattice(metal)]
    names: dict[str, str] = {}
    for text in wanted.materials:
        try:
            alloy_parts(text)
            metal_lattice(text)
        except FewnmError as error:
            raise SpecificationError(f"candidates.materials: {error}") from None
        names.setdefault(parse_formula(text).formula, text.strip())
    return list(names.values())


def _has_lattice(metal: str) -> bool:
    try:
        metal_lattice(metal)
    except UnknownMaterialError:
        return False
    return True


def _fitting_shapes(
    name: str, wanted: "Candidates", question: "SurfaceQuestion"
) -> tuple[list[str], list[str]]:
    """Return the shapes that a metal forms, and what is wrong with the others."""
    metal = metal_lattice(name)
    fitting, faults = [], []
    for shape in dict.fromkeys(wanted.shapes) or [USUAL_SHAPES[metal.structure]]:
        try:
            _check_shape(metal, shape, is_step=question.is_step)
        except FewnmError as error:
            faults.append(str(error))
        else:
            fitting.append(shape)
    return fitting, faults


def _check_shape(metal: MetalLattice, shape: str, *, is_step: bool) -> None:
    require_shape(metal.structure, shape)
    if is_step:
        most_step_sites(metal.name, shape, _ANY_SIZE_nm)


def _check_shapes(wanted: "Candidates", chosen: pd.DataFrame) -> None:
    known = sorted({s for structure in USUAL_SHAPES for s in available_shapes(structure)})
    for shape in wanted.shapes:
        if (chosen["shape"] == shape).any():
            continue
        structures = shape_structures(shape)
        raise SpecificationError(
            explain(
                f"{shape!r} is a shape of {' and '.join(structures)} metals, none of which is left"
                if structures
                else f"unknown shape {shape!r}",
                where="candidates.shapes",
                expected=f"one of {', '.join(known)}",
            )
        )


def _check_smallest(wanted: "Candidates", names: list[str]) -> None:
    low = wanted.diameter_nm[0]
    for name in names:
        least = float(equivalent_diameter_nm(FEWEST_ATOMS, metal_lattice(name).atomic_volume_nm3))
        if low < least - 1e-3:
            raise SpecificationError(
                explain(
                    f"too small for a particle of {name}",
                    where="candidates.diameter_nm",
                    expected=f"{least:.3f} nm ({FEWEST_ATOMS} atoms) or more",
                    found=f"{low:g} nm",
                    do="raise the smallest diameter or leave the metal out",
                )
            )


def _nothing_left(refused: list[tuple[str, str]]) -> str:
    return explain(
        "no metal is left",
        where="candidates",
        found="; ".join(f"{name}: {reason}" for name, reason in refused[:5]),
        do="allow more metals, shapes or elements",
    )
