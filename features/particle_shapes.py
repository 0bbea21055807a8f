"""Named shapes as one-parameter series of closed shells, built atom by atom.

Shell 1 is the smallest particle of a series. Cut shapes follow van Hardeveld and Hartog, Surf.
Sci. 15, 189 (1969); the Wulff shape, whose facets depend on the metal, is in
`features.particle_wulff`.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

from features.errors import PhysicsRangeError, explain
from features.particle_lattice import IDEAL_C_OVER_A, crystal_lattice
from features.particle_polyhedron import ExplicitParticle, cut_particle
from features.particle_twinned import decahedron_particle, icosahedron_particle

__all__ = [
    "ShapeSeries",
    "available_shapes",
    "explicit_particle",
    "require_shape",
    "shape_series",
    "shape_structures",
]


@dataclass(frozen=True)
class ShapeSeries:
    """One shape of one structure.

    Attributes
    ----------
    shape, structure : str
    steps : tuple of (str, int)
        Facet families and how far each moves out per shell; empty for twinned particles.
    build : callable or None
        Builder of a twinned particle by its number of shells.
    """

    shape: str
    structure: str
    steps: tuple[tuple[str, int], ...] = ()
    build: Callable[[int], ExplicitParticle] | None = None


_SERIES = (
    ShapeSeries("truncated_octahedron", "fcc", (("(111)", 3), ("(100)", 2))),
    ShapeSeries("cuboctahedron", "fcc", (("(111)", 2), ("(100)", 1))),
    ShapeSeries("octahedron", "fcc", (("(111)", 1),)),
    ShapeSeries("cube", "fcc", (("(100)", 1),)),
    ShapeSeries("icosahedron", "fcc", build=icosahedron_particle),
    ShapeSeries("decahedron", "fcc", build=decahedron_particle),
    ShapeSeries("rhombic_dodecahedron", "bcc", (("(110)", 1),)),
    ShapeSeries("truncated_rhombic_dodecahedron", "bcc", (("(110)", 2), ("(100)", 3))),
    ShapeSeries("cube", "bcc", (("(100)", 1),)),
    ShapeSeries("truncated_hexagonal_bipyramid", "hcp", (("(0001)", 1), ("(10-11)", 2))),
    ShapeSeries("hexagonal_prism", "hcp", (("(0001)", 1), ("(10-10)", 2))),
)
_BY_NAME = {(series.structure, series.shape): series for series in _SERIES}
WULFF = "wulff"


def available_shapes(structure: str) -> list[str]:
    """Return the shapes that can be built on a structure.

    Parameters
    ----------
    structure : {"fcc", "bcc", "hcp"}

    Returns
    -------
    list of str

    Raises
    ------
    UnknownMaterialError
        If there is no lattice for the structure.

    Examples
    --------
    >>> available_shapes("bcc")
    ['rhombic_dodecahedron', 'truncated_rhombic_dodecahedron', 'cube', 'wulff']
    """
    crystal_lattice(structure)
    return [series.shape for series in _SERIES if series.structure == structure] + [WULFF]


def shape_structures(shape: str) -> list[str]:
    """Return the structures that a shape can be built on.

    Parameters
    ----------
    shape : str

    Returns
    -------
    list of str
        Empty for an unknown shape.

    Examples
    --------
    >>> shape_structures("cube")
    ['fcc', 'bcc']
    """
    return [s for s in ("fcc", "bcc", "hcp") if shape in available_shapes(s)]


def require_shape(structure: str, shape: str) -> None:
    """Refuse a shape that a structure does not form.

    Parameters
    ----------
    structure, shape : str

    Raises
    ------
    UnknownMaterialError
        If there is no lattice for the structure.
    PhysicsRangeError
        If the shape is unknown, or belongs to another structure.

    Examples
    --------
    >>> require_shape("fcc", "cube")
    """
    if shape in available_shapes(structure):
        return
    others = shape_structures(shape)
    what = f"{shape!r} is a shape of {' and '.join(others)} metals" if others else "unknown shape"
    raise PhysicsRangeError(
        explain(
            what,
            expected=f"for {structure} one of {', '.join(available_shapes(structure))}",
            found=f"{shape!r}",
            do="name a shape of the metal's structure",
        )
    )


def shape_series(structure: str, shape: str) -> ShapeSeries:
    """Return the series of closed shells of a named shape (not ``wulff``).

    Parameters
    ----------
    structure, shape : str

    Returns
    -------
    ShapeSeries

    Raises
    ------
    PhysicsRangeError
        If the structure has no such series of shells.

    Examples
    --------
    >>> shape_series("fcc", "cuboctahedron").steps
    (('(111)', 2), ('(100)', 1))
    """
    require_shape(structure, shape)
    if shape == WULFF:
        raise PhysicsRangeError(
            explain(
                "the Wulff shape has no series of shells of its own",
                found=shape,
                do="call wulff_particle with the metal's surface energies",
            )
        )
    return _BY_NAME[structure, shape]


@cache
def explicit_particle(
    structure: str, shape: str, shell: int, c_over_a: float = IDEAL_C_OVER_A
) -> ExplicitParticle:
    """Build a particle of a closed shell atom by atom.

    Parameters
    ----------
    structure : {"fcc", "bcc", "hcp"}
    shape : str
        One of `available_shapes`, not ``wulff``.
    shell : int, >= 1
        1 is the smallest of the series.
    c_over_a : float, default sqrt(8/3)
        Axial ratio of hcp, which moves positions only.

    Returns
    -------
    ExplicitParticle
        Positions in nearest-neighbour distances, coordination and site classes.

    Raises
    ------
    PhysicsRangeError
        If the shape does not fit the structure or the shell is below 1.

    Examples
    --------
    >>> [explicit_particle("fcc", "truncated_octahedron", n).n_atoms for n in (1, 2, 3)]
    [38, 201, 586]
    """
    series = shape_series(structure, shape)
    if shell < 1:
        raise PhysicsRangeError(explain("no such shell", expected="1 or more", found=str(shell)))
    if series.build is not None:
        return series.build(shell)
    lattice = crystal_lattice(structure, c_over_a)
    return cut_particle(lattice, {name: step * shell for name, step in series.steps})
