"""Typed, checked specifications of a run, read from TOML.

Targets may be given in nm or eV; inside, energies are in eV and lengths in nm.
"""

import tomllib
from collections.abc import Mapping
from difflib import get_close_matches
from pathlib import Path
from typing import Annotated, Any, Literal, Self

from pydantic import BaseModel, Discriminator, Field, Tag, ValidationError, model_validator

from features.emission import HC_eV_nm
from features.errors import SpecificationError, explain
from features.size_control import SizeShape, measured_sizes
from features.size_gap import LARGEST_DIAMETER_nm, SMALLEST_DIAMETER_nm
from screening.limit_rules import METAL_LIMITS, OPTICAL_LIMITS, Limits
from screening.plan_rules import Plan
from screening.space_rules import Space
from screening.strict_part import StrictPart
from screening.surface_target import SURFACE_QUANTITIES, SurfaceTarget, target_kind
from screening.user_tables import collect_faults, numeric_column, read_user_table

__all__ = [
    "Candidates",
    "Laboratory",
    "Shortlist",
    "Specification",
    "SurfaceTarget",
    "Target",
    "load_specification",
    "parse_specification",
    "read_sizes",
]

_LARGEST_FILE_BYTES = 1_000_000
_MOST_DIAMETERS = 20_000

Element = Annotated[str, Field(pattern=r"^[A-Z][a-z]?$")]
Pair = Annotated[list[float], Field(min_length=2, max_length=2)]


class Target(StrictPart):
    """What the samples must hit.

    Exactly one of ``window_nm`` and ``window_eV``; both ends belong to the window.
    """

    quantity: Literal["emission", "optical_gap"] = Field(
        default="emission", description="emission of the batch, or its optical gap"
    )
    window_nm: Pair | None = Field(default=None, description="wavelengths, nm, 150 to 20000")
    window_eV: Pair | None = Field(default=None, description="energies, eV, 0.05 to 8")

    @model_validator(mode="after")
    def _one_window(self) -> Self:
        if (self.window_nm is None) == (self.window_eV is None):
            raise ValueError("expected exactly one of window_nm and window_eV")
        window = self.window_nm or self.window_eV or []
        if not window[0] < window[1]:
            raise ValueError(f"the window is upside down: expected low < high, found {window}")
        if self.window_nm and not 150.0 <= window[0] < window[1] <= 20_000.0:
            raise ValueError(
                f"window_nm out of range: expected 150 to 20000 nm, found {window}"
                + ("; are these eV? then write window_eV" if window[1] < 20.0 else "")
            )
        if self.window_eV and not 0.05 <= window[0] < window[1] <= 8.0:
            raise ValueError(
                f"window_eV out of range: expected 0.05 to 8 eV, found {window}"
                + ("; are these nm? then write window_nm" if window[1] > 100.0 else "")
            )
        return self

    @property
    def energies_eV(self) -> tuple[float, float]:
        """Window as energies, eV, low before high."""
        if self.window_eV is not None:
            return self.window_eV[0], self.window_eV[1]
        low, high = self.window_nm or (1.0, 1.0)
        return HC_eV_nm / high, HC_eV_nm / low


TargetChoice = Annotated[
    Annotated[Target, Tag("emission")] | Annotated[SurfaceTarget, Tag("surface")],
    Discriminator(target_kind),
]
"""Which of the two tracks a target belongs to is told by its keys."""

_TARGETS: Mapping[Any, type[BaseModel]] = {"emission": Target, "surface": SurfaceTarget}


class Candidates(StrictPart):
    """Which materials and diameters may be made."""

    materials: list[str] = Field(
        default_factory=list, max_length=10_000, description="formulas; empty for all in the tables"
    )
    families: list[str] = Field(default_factory=list, description="families; empty for all")
    spaces: list[Space] = Field(
        default_factory=list, max_length=50, description="compositions to enumerate"
    )
    shapes: list[str] = Field(
        default_factory=list, max_length=50, description="metal particles; empty for the usual one"
    )
    exclude_elements: list[Element] = Field(default_factory=list, description="element symbols")
    exclude_materials: list[str] = Field(
        default_factory=list, max_length=10_000, description="formulas left out"
    )
    diameter_nm: Pair = Field(
        default=[SMALLEST_DIAMETER_nm, 12.0], description="smallest and largest core diameter, nm"
    )
    step_nm: float = Field(default=0.05, ge=0.001, le=5.0, description="diameter step, nm")
    unmeasured: bool = Field(
        default=True, description="also materials without size data (state: new)"
    )

    @model_validator(mode="after")
    def _sizes(self) -> Self:
        low, high = self.diameter_nm
        if not 0.0 < low <= high <= LARGEST_DIAMETER_nm:
            raise ValueError(
                f"diameter_nm out of range: expected 0 < low <= high <= {LARGEST_DIAMETER_nm} nm, "
                f"where the model holds, found {self.diameter_nm}"
            )
        if (high - low) / self.step_nm > _MOST_DIAMETERS:
            raise ValueError(f"step_nm is too fine: expected at most {_MOST_DIAMETERS} diameters")
        return self


class Sizes(StrictPart):
    """A measured size distribution; in a file it is named by the path of its CSV table."""

    diameter_nm: list[float] = Field(min_length=2, max_length=1_000_000)
    count: list[float] | None = Field(default=None, max_length=1_000_000)

    @model_validator(mode="after")
    def _can_be(self) -> Self:
        self.shape()
        return self

    def shape(self) -> SizeShape:
        """Return the shape of the distribution."""
        return measured_sizes(self.diameter_nm, self.count)


class Laboratory(StrictPart):
    """What the laboratory can hold.

    Sizes are normally distributed with ``size_spread``, or as measured in the file ``sizes``.
    """

    size_spread: float = Field(
        default=0.07, gt=0.0, le=0.5, description="standard deviation of the diameter over its mean"
    )
    sizes: Sizes | None = Field(
        default=None, description="CSV of a measured distribution: diameter_nm, optional count"
    )
    least_fraction: float = Field(
        default=0.5, gt=0.0, lt=1.0, description="share of particles inside for a good batch"
    )

    results: str | None = Field(
        default=None, max_length=4096, description="CSV of own results, beside the specification"
    )

    @model_validator(mode="after")
    def _one_distribution(self) -> Self:
        if self.sizes is not None and "size_spread" in self.model_fields_set:
            raise ValueError("expected size_spread or sizes, found both")
        return self

    def size_shape(self) -> SizeShape | float:
        """Return the measured shape of the size distribution, or the spread of a normal one."""
        return self.size_spread if self.sizes is None else self.sizes.shape()


class Shortlist(StrictPart):
    """How the answer is cut."""

    length: int = Field(default=10, ge=1, le=1000, description="most rows")
    per_material: int = Field(default=1, ge=1, le=100, description="most diameters of a material")
    least_chance: float = Field(
        default=0.01, ge=0.0, lt=1.0, description="least chance in the window to be listed"
    )
    spacing_nm: float = Field(
        default=0.3, ge=0.0, le=10.0, description="least distance of two diameters of a material"
    )


class Specification(StrictPart):
    """One run."""

    title: str = Field(default="Untitled", min_length=1, max_length=200, description="heading")
    target: TargetChoice
    candidates: Candidates = Candidates()
    laboratory: Laboratory = Laboratory()
    limits: Limits = Limits()
    plan: Plan = Plan()
    shortlist: Shortlist = Shortlist()
    seed: int = Field(default=0, ge=0, le=2**31 - 1, description="seed of the trees")

    @model_validator(mode="after")
    def _of_one_track(self) -> Self:
        """Refuse candidates and limits that only the other track knows."""
        wanted = self.candidates
        if isinstance(self.target, SurfaceTarget):
            for name in ("families", "spaces"):
                if getattr(wanted, name):
                    raise ValueError(f"candidates.{name} is for quantum dots: name metals instead")
        elif wanted.shapes:
            raise ValueError("candidates.shapes is for metal particles: leave it out")
        elif wanted.diameter_nm[0] < SMALLEST_DIAMETER_nm:
            raise ValueError(
                f"candidates.diameter_nm out of range: expected {SMALLEST_DIAMETER_nm} nm or more, "
                f"where the model holds, found {wanted.diameter_nm}"
            )
        wrong = OPTICAL_LIMITS if isinstance(self.target, SurfaceTarget) else METAL_LIMITS
        if asked := [name for name in self.limits.asked() if name in wrong]:
            raise ValueError(
                f"limits.{asked[0]} has no meaning for the target {self.target.quantity}: "
                "take it out"
            )
        return self


def _known_keys(location: tuple[Any, ...]) -> list[str]:
    """Return the keys that the table at a location knows."""
    fields: Mapping[str, Any] = Specification.model_fields
    for step in location[:-1]:
        annotation = _TARGETS.get(step) or (fields[step].annotation if step in fields else None)
        if step == "target":
            continue
        if not (isinstance(annotation, type) and issubclass(annotation, BaseModel)):
            return []
        fields = annotation.model_fields
    return list(fields)


def _message(error: Any, where: str) -> str:
    """Turn one validation error into what, where, expected, found, what to do."""
    location = tuple(error["loc"])
    path = ".".join(str(step) for step in location if step not in _TARGETS) or "top level"
    place = f"{where}, {path}" if where else path
    if error["type"] == "extra_forbidden":
        known = _known_keys(location)
        near = get_close_matches(str(location[-1]), known, n=1, cutoff=0.4)
        return explain(
            f"unknown key {location[-1]!r}",
            where=place,
            expected=f"one of {', '.join(known)}",
            do=f"did you mean {near[0]}?" if near else "",
        )
    if error["type"] == "missing":
        return explain(f"missing key {location[-1]!r}", where=place, do="add it")
    if error["type"] == "value_error":
        return explain(str(error["ctx"]["error"]), where=place)
    found, expected = repr(error.get("input")), error["msg"]
    if path == "target.quantity":
        expected += f" for quantum dots, {' or '.join(map(repr, SURFACE_QUANTITIES))} for catalysts"
    return explain("wrong value", where=place, expected=expected, found=found[:80])


def parse_specification(data: Mapping[str, Any], where: str = "") -> Specification:
    """Check a parsed specification.

    Parameters
    ----------
    data : mapping
        Tables and keys as in TOML.
    where : str, default ""
        File name for messages.

    Returns
    -------
    Specification

    Raises
    ------
    SpecificationError
        With all faults at once, one a line.

    Examples
    --------
    >>> specification = parse_specification({"target": {"window_nm": [625, 635]}})
    >>> [round(energy, 3) for energy in specification.target.energies_eV]
    [1.953, 1.984]
    """
    try:
        return Specification.model_validate(data)
    except ValidationError as error:
        messages = [_message(fault, where) for fault in error.errors()]
        raise SpecificationError("\n".join(messages)) from None


def load_specification(path: Path) -> Specification:
    """Read and check a specification file.

    Parameters
    ----------
    path : pathlib.Path
        A TOML file, at most 1 MB.

    Returns
    -------
    Specification

    Raises
    ------
    SpecificationError
        If the file cannot be read, is not TOML, or cannot be run as written.
    """
    try:
        if path.stat().st_size > _LARGEST_FILE_BYTES:
            raise SpecificationError(
                explain("specification too large", where=str(path), expected="at most 1 MB")
            )
        text = path.read_text(encoding="utf-8")
    except OSError as error:
        raise SpecificationError(
            explain("cannot read the specification", where=str(path), found=error.strerror or "")
        ) from None
    except UnicodeDecodeError:
        raise SpecificationError(
            explain("the specification is not UTF-8 text", where=str(path))
        ) from None
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise SpecificationError(
            explain("not a TOML file", where=str(path), found=str(error))
        ) from None
    return parse_specification(_with_tables(data, path.parent), path.name)


def _with_tables(data: dict[str, Any], folder: Path) -> dict[str, Any]:
    """Put the numbers of a named table in the place of its path, which counts from the file."""
    laboratory: Any = data.get("laboratory")
    if not isinstance(laboratory, dict) or not isinstance(laboratory.get("sizes"), str):
        return data
    sizes = read_sizes(folder / laboratory["sizes"])
    return {**data, "laboratory": {**laboratory, "sizes": sizes}}


def read_sizes(path: Path) -> dict[str, list[float]]:
    """Read a table of a measured size distribution.

    Parameters
    ----------
    path : pathlib.Path
        CSV with the column diameter_nm and optionally count.

    Returns
    -------
    dict of str to list of float
        By column.

    Raises
    ------
    TableError
        With all faulty rows at once.
    """
    table = read_user_table(path, ("diameter_nm",), ("count",))
    columns, faults = {}, []
    for column in table.columns:
        low = 0.1 if column == "diameter_nm" else 0.0
        columns[column], wrong = numeric_column(table, column, low, 1e9, "")
        faults += wrong
    collect_faults(path.name, faults)
    return {column: values.tolist() for column, values in columns.items()}
