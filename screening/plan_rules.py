"""The ``[plan]`` table of a specification: how the next samples are chosen."""

from typing import Annotated, Literal

from pydantic import Field

from screening.strict_part import StrictPart

__all__ = ["POLICIES", "Plan", "Policy"]

Policy = Literal["hit", "approach", "edge", "teach"]
POLICIES: tuple[Policy, ...] = ("hit", "approach", "edge", "teach")
Cost = Annotated[float, Field(gt=0.0, le=1e9)]
Size = Annotated[float, Field(gt=0.0, le=100.0)]


class Plan(StrictPart):
    """How a batch of samples is chosen.

    ``hit`` makes it likely that at least one lands, ``approach`` comes nearer to the window than
    the best result so far, ``edge`` settles what lies near the window's edges, ``teach`` lowers
    the uncertainty of the likeliest candidates.
    """

    samples: int = Field(default=6, ge=1, le=100, description="samples of a batch")
    policy: Policy = Field(default="hit", description="hit, approach, edge or teach")
    random_share: float = Field(
        default=0.15, ge=0.0, le=0.5, description="share drawn at random inside the window"
    )
    per_material: int = Field(default=2, ge=1, le=100, description="most samples of a material")
    spacing_nm: float = Field(
        default=0.3, ge=0.0, le=10.0, description="least distance of two samples of a material"
    )
    sizes_nm: list[Size] = Field(
        default_factory=list, max_length=1000, description="diameters that can be made; empty: all"
    )
    costs: dict[str, Cost] = Field(
        default_factory=dict, description="cost of one sample by material; 1 for others"
    )
