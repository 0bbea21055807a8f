"""What the audited figures say, in plain words and against what was promised.

Everything here reads the table of figures only, so that a document made from packaged figures and
the audit that measured them say the same.
"""

from dataclasses import dataclass

import pandas as pd

from screening.calibration import LEVELS
from screening.left_out import BASELINE

__all__ = [
    "LEFT_OUT",
    "Target",
    "distance_words",
    "parsed",
    "targets",
    "under_coverage_words",
    "verdicts",
]

LEFT_OUT = {
    "random rows": "rows drawn at random",
    "sources": "whole sources",
    "size ranges": "size ranges of a material",
    "materials": "whole materials",
    "families": "whole families",
    "metals": "whole metals",
    "compositions": "whole compositions",
    "elements": "whole elements",
}
"""What each split leaves out, in words."""

_ENOUGH_PREDICTIONS = 20
_FEWEST_GROUPS = 3
_ENOUGH_GROUPS = 9


@dataclass(frozen=True)
class Target:
    """A promise, whether the figures keep it, and the figures."""

    promise: str
    reached: bool
    found: str


def parsed(figures: pd.DataFrame) -> pd.DataFrame:
    """Take the names of figures apart.

    Parameters
    ----------
    figures : pandas.DataFrame
        As from `screening.audited.audited_figures`.

    Returns
    -------
    pandas.DataFrame
        With columns statistic, track, split and part more; rows of other tables are left out.
    """
    names = figures["figure"].str.split(", ", n=3, expand=True).reindex(columns=range(4))
    names = names.set_axis(["statistic", "track", "split", "part"], axis=1)
    frame = figures.join(names.fillna(""))
    return frame[frame["split"].isin(list(LEFT_OUT))]


def _one(figures: pd.DataFrame, statistic: str, split: str, state: str) -> pd.Series | None:
    """Return a whole segment's figure, or None where it was not measured."""
    chosen = figures["statistic"].eq(statistic) & figures["part"].eq("")
    rows = figures[chosen & figures["split"].eq(split) & figures["state"].eq(state)]
    return None if rows.empty else rows.iloc[0]


def _segments(figures: pd.DataFrame) -> list[tuple[str, str, str]]:
    keys = figures[["track", "split", "state"]].drop_duplicates()
    return list(keys.itertuples(index=False, name=None))


def verdicts(figures: pd.DataFrame) -> list[str]:
    """Say for every segment whether the model beats the best baseline, by its paired lead.

    Parameters
    ----------
    figures : pandas.DataFrame
        As from `parsed`.

    Returns
    -------
    list of str
        One sentence a track, split and state that holds baselines.

    Notes
    -----
    The best baseline is the one with the least error on these rows, which favours it.
    """
    sentences = []
    for track, split, state in _segments(figures):
        own = _one(figures, "mean_absolute_error_eV", split, state)
        errors = _compared(figures, "error_eV of", split, state)
        if own is not None and not errors.empty:
            best = errors.sort_values("value", kind="stable").iloc[0]
            name = best["statistic"].removeprefix(f"error_eV of {BASELINE}")
            lead = _one(figures, f"lead_eV over {BASELINE}{name}", split, state)
            assert lead is not None
            sentences.append(
                f"{track}, {split} left out ({state}): error {own['value']:.3f} eV; best baseline "
                f"is {name} with {best['value']:.3f} eV; lead {lead['value']:.3f} eV "
                f"{_judged(lead)}."
                f"{_undecided(_compared(figures, 'lead_eV over', split, state), name)}"
            )
    return sentences


def _undecided(leads: pd.DataFrame, best: str) -> str:
    """Name the other baselines over which the lead is not told apart from zero."""
    names = leads.loc[~leads["low"].gt(0.0), "statistic"]
    others = [n.removeprefix(f"lead_eV over {BASELINE}") for n in names]
    others = [name for name in others if name != best]
    return f" Not told apart from zero, or worse, over: {', '.join(others)}." if others else ""


def _compared(figures: pd.DataFrame, start: str, split: str, state: str) -> pd.DataFrame:
    named = figures["statistic"].str.startswith(f"{start} {BASELINE}")
    return figures[named & figures["split"].eq(split) & figures["state"].eq(state)]


def _judged(lead: pd.Series) -> str:
    """Write the interval of a lead and what it says."""
    if pd.isna(lead["low"]):
        return f"(too few groups for an interval: {lead['n_groups']:.0f})"
    ends = f"({lead['low']:.3f} to {lead['high']:.3f})"
    if lead["low"] > 0.0:
        return f"{ends}: the model is better"
    if lead["high"] < 0.0:
        return f"{ends}: the baseline is better"
    return f"{ends}: not told apart from zero"


def under_coverage_words(figures: pd.DataFrame) -> list[str]:
    """Name the sizes, families and adsorbates whose 90 % intervals hold too little.

    Parameters
    ----------
    figures : pandas.DataFrame
        As from `parsed`.

    Returns
    -------
    list of str
        One sentence a part of three groups and more whose 90 % interval held less than 75 %, or
        whose exact binomial band
        lies below 90 %, and one a segment whose band at any level lies below that level.
    """
    found = []
    for level in LEVELS:
        rows = figures[figures["statistic"].eq(f"coverage_{100 * level:.0f}")]
        named = rows["part"].str.startswith(("family", "size", "adsorbate")) & (level == LEVELS[-1])
        few = rows["n_groups"].lt(_FEWEST_GROUPS)
        low = rows["high"].lt(level) | (named & rows["value"].lt(0.75) & ~few)
        rows = rows[(named | rows["part"].eq("")) & low]
        found += [_under(row, level) for _, row in rows.iterrows()]
    return found


def _under(row: pd.Series, level: float) -> str:
    sure = row["high"] < level
    where = f"{row['part'] or 'all rows together'}: the {level:.0%} interval"
    tail = (
        "intervals are too narrow there"
        if sure
        else f"{row['n_groups']:.0f} groups cannot tell this from chance"
    )
    return (
        f"{row['track']}, {row['split']} left out ({row['state']}), {where} "
        f"held {row['value']:.0%} ({row['low']:.0%} to {row['high']:.0%}); {tail}."
    )


def distance_words(figures: pd.DataFrame) -> list[str]:
    """Say how the error grows with the distance to the data.

    Parameters
    ----------
    figures : pandas.DataFrame
        As from `parsed`.

    Returns
    -------
    list of str
        One sentence a segment in which more than one reach was met.
    """
    sentences = []
    reach = figures[figures["part"].str.startswith("reach")]
    for track, split, state in _segments(reach):
        rows = reach[reach["split"].eq(split) & reach["state"].eq(state)]
        error = _by_part(rows, "mean_absolute_error_eV")
        held = _by_part(rows, "coverage_90")
        parts = [
            f"{name} {error[f'reach {name}']:.3f} eV"
            + (f" (90 % held {held[f'reach {name}']:.0%})" if held else "")
            for name in ("near", "edge", "far")
            if f"reach {name}" in error
        ]
        sentences.append(f"{track}, {split} left out ({state}): error {', '.join(parts)}.")
    return sentences


def _by_part(rows: pd.DataFrame, statistic: str) -> dict[str, float]:
    """Return the values of a statistic by the part they were measured on."""
    chosen = rows[rows["statistic"].eq(statistic)]
    return dict(zip(chosen["part"], chosen["value"].astype(float), strict=True))


def targets(figures: pd.DataFrame) -> list[Target]:
    """Hold the figures against what the program promises.

    Parameters
    ----------
    figures : pandas.DataFrame
        As from `parsed`.

    Returns
    -------
    list of Target
        Promises that these figures can decide: with fewer than nine groups none is.
    """
    found = [
        _coverage_target(figures, "size ranges", "on record", 0.87, 0.93),
        _coverage_target(figures, "materials", "new", 0.85, 0.95),
        _families_target(figures),
    ]
    found += [_windows_target(figures, *key) for key in _segments(figures)]
    found += [
        _lead_target(figures, split)
        for split in ("materials", "metals", "compositions", "elements")
    ]
    return [target for target in found if target is not None]


def _coverage_target(
    figures: pd.DataFrame, split: str, state: str, low: float, high: float
) -> Target | None:
    row = _one(figures, "coverage_90", split, state)
    if row is None or row["n_groups"] < _ENOUGH_GROUPS:
        return None
    return Target(
        f"90 % intervals hold {low:.0%} to {high:.0%}, {split} left out ({state})",
        bool(low <= row["value"] <= high),
        f"{row['value']:.1%} ({row['low']:.1%} to {row['high']:.1%}, {row['n_groups']:.0f} groups)",
    )


def _families_target(figures: pd.DataFrame) -> Target | None:
    rows = figures[
        figures["statistic"].eq("coverage_90") & figures["part"].str.startswith("family")
    ]
    rows = rows[rows["split"].eq("size ranges") & rows["state"].eq("on record")]
    if rows["n_groups"].sum() < _ENOUGH_GROUPS:
        return None
    worst = rows.sort_values("value", kind="stable").iloc[0]
    return Target(
        "no family below 75 % coverage at 90 %, size ranges left out (on record)",
        bool(worst["value"] >= 0.75),
        f"lowest: {worst['part']} with {worst['value']:.1%} on {worst['n_groups']:.0f} materials",
    )


def _windows_target(figures: pd.DataFrame, track: str, split: str, state: str) -> Target | None:
    rows = figures[figures["split"].eq(split) & figures["state"].eq(state)]
    rows = rows[rows["n_rows"].ge(_ENOUGH_PREDICTIONS) & rows["part"].str.startswith("chance")]
    shared = rows[rows["statistic"].eq("hit_frequency")].set_index("part")
    alone = rows[rows["statistic"].eq("perfect model: hit_frequency")].set_index("part")
    if shared.empty or shared["n_groups"].max() < _ENOUGH_GROUPS:
        return None
    inside = shared["value"].between(shared["low"], shared["high"])
    strict = shared["value"].between(alone["low"], alone["high"])
    return Target(
        f"hit frequencies within a perfect model's 95 % band in every bin of "
        f"{_ENOUGH_PREDICTIONS} predictions and more, {track}, {split} left out ({state})",
        bool(inside.all()),
        f"{inside.sum()} of {len(inside)} bins inside if rows of a group err together, "
        f"{strict.sum()} if rows err independently",
    )


def _lead_target(figures: pd.DataFrame, split: str) -> Target | None:
    errors = _compared(figures, "error_eV of", split, "new")
    if errors.empty or errors["n_groups"].iloc[0] < _ENOUGH_GROUPS:
        return None
    best = errors.sort_values("value", kind="stable").iloc[0]
    name = str(best["statistic"]).removeprefix("error_eV of ")
    lead = _one(figures, f"lead_eV over {name}", split, "new")
    assert lead is not None
    return Target(
        f"the model is better than the best baseline, {split} left out",
        bool(lead["low"] > 0.0),
        f"lead over {name.removeprefix(BASELINE)} {lead['value']:.3f} eV {_judged(lead)}",
    )
