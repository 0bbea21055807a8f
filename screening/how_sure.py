"""The documents that print audited figures, made from the packaged ones.

``python -m screening.how_sure`` in a checkout writes ``docs/how-sure.md`` and the table of
figures in ``README.md``.
"""

import re
from collections.abc import Iterable, Sequence
from pathlib import Path

import pandas as pd

from features.errors import TableError, explain
from features.tables import read_table
from screening.audit_words import (
    LEFT_OUT,
    distance_words,
    parsed,
    targets,
    under_coverage_words,
    verdicts,
)
from screening.auditing import audit_hash
from screening.evidence_table import evidence_markdown
from screening.left_out import BASELINE, LADDER
from screening.window_reliability import CHANCE_EDGES, WIDTHS_eV

__all__ = ["how_sure_markdown", "packaged_figures", "write_pages"]

_EVIDENCE = re.compile(r"(<!-- evidence -->\n).*?(\n<!-- /evidence -->)", re.DOTALL)
_SCORES = {
    "mean_absolute_error_eV": "mean absolute error (eV)",
    "root_mean_square_error_eV": "root-mean-square error (eV)",
    "coverage_50": "inside 50 %",
    "coverage_80": "inside 80 %",
    "coverage_90": "inside 90 %",
    "crps_eV": "CRPS (eV)",
    "interval_score_90_eV": "interval score, 90 % (eV)",
    "pit_distance": "PIT distance",
    "brier_score": "Brier score",
    "observed_hits": "hits",
}
_PARTED = ("size ranges", "materials", "metals", "compositions", "elements")


def packaged_figures() -> pd.DataFrame:
    """Return the packaged figures that the audit measured on the packaged tables.

    Returns
    -------
    pandas.DataFrame
        As `screening.audit_words.parsed`.

    Raises
    ------
    TableError
        If the packaged figures were measured on other tables or another model format.
    """
    figures = read_table("held_out_figures")
    own = figures[figures["evidence_hash"].eq(audit_hash())].reset_index(drop=True)
    if own.empty:
        raise TableError(
            explain(
                "the packaged figures belong to other tables",
                where="held_out_figures",
                expected=f"hash {audit_hash()}",
                do="run `make evidence`",
            )
        )
    return parsed(own)


def how_sure_markdown() -> str:
    """Return the page on how sure the program is, every figure from the packaged audit."""
    figures = packaged_figures()
    kept = [
        [target.promise, "yes" if target.reached else "**no**", target.found]
        for target in targets(figures)
    ]
    parts = [
        _INTRODUCTION,
        "## Predicted chance against hit frequency\n",
        _WINDOWS,
        _reliability(figures),
        "## Promises\n",
        _table(["promise", "kept", "found"], kept),
        "## Splits side by side\n",
        _PERFECT,
        _scores(figures),
        "## Median and worst group\n",
        _groups(figures),
        "## Against what you would do without fewnm\n",
        _list(verdicts(figures)),
        _leads(figures),
        "## Coverage of the 90 % interval by family, size and adsorbate\n",
        _coverage(figures),
        _NAMED,
        _list(under_coverage_words(figures)),
        "## Far from the data\n",
        _DISTANCE,
        _list(distance_words(figures)),
        _LIMITS,
    ]
    return "\n".join(parts)


def _table(header: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    lines = [header, ["---"] * len(header), *rows]
    return "\n".join(f"| {' | '.join(line)} |" for line in lines) + "\n"


def _list(lines: list[str]) -> str:
    return "\n".join(f"- {line}" for line in lines or ["Nothing to name."]) + "\n"


def _segment(row: pd.Series) -> str:
    return f"{row['track']}, {row['split']} ({row['state']})"


def _with_ends(row: pd.Series) -> str:
    """Write a value with its ends, where it has any."""
    value = f"{row['value']:.3f}"
    return value if pd.isna(row["low"]) else f"{value} ({row['low']:.3f} to {row['high']:.3f})"


def _reliability(figures: pd.DataFrame) -> str:
    keys = ["track", "split", "state", "part"]
    predicted = figures[figures["statistic"].eq("predicted_chance")].set_index(keys)["value"]
    alone = figures[figures["statistic"].eq("perfect model: hit_frequency")].set_index(keys)
    rows = []
    for _, row in figures[figures["statistic"].eq("hit_frequency")].iterrows():
        key = tuple(row[keys])
        strict = alone.loc[key]
        rows.append(
            [
                _segment(row),
                str(row["part"]).removeprefix("chance "),
                f"{predicted.loc[key]:.3f}",
                f"{row['value']:.3f}",
                f"{row['low']:.3f} to {row['high']:.3f}",
                f"{strict['low']:.3f} to {strict['high']:.3f}",
                f"{row['n_rows']}",
                f"{row['n_groups']}",
            ]
        )
    header = ["left out (state)", "bin of chance", "predicted", "hits", "band, errors shared"]
    return _table([*header, "band, errors independent", "windows", "groups"], rows)


def _scores(figures: pd.DataFrame) -> str:
    whole = figures[figures["part"].eq("")]
    rows = []
    for _, part in whole.groupby(["track", "split", "state"], sort=False):
        own = {str(row["statistic"]): row for _, row in part.iterrows()}
        for name, label in _SCORES.items():
            ideal = own.get(f"perfect model: {name}")
            if name in own and ideal is not None:
                shown = _with_ends(own[name])
                rows.append([_segment(part.iloc[0]), label, shown, _with_ends(ideal)])
    return _table(["left out (state)", "statistic", "measured", "perfect model"], rows)


def _groups(figures: pd.DataFrame) -> str:
    rows = figures[figures["part"].eq("") & figures["statistic"].eq("mean_absolute_error_eV")]
    cells = [
        [
            _segment(row),
            f"{row['median']:.3f}",
            f"{row['worst']:.3f} ({row['worst_group']})",
            f"{row['n_groups']}",
            f"{row['n_rows']}",
        ]
        for _, row in rows.iterrows()
    ]
    header = ["left out (state)", "error of the median group (eV)", "of the worst (eV)"]
    return _table([*header, "groups", "rows"], cells)


def _leads(figures: pd.DataFrame) -> str:
    rows = []
    leads = figures[figures["statistic"].str.startswith("lead_eV over ")]
    for _, row in leads[leads["split"].isin(_PARTED)].iterrows():
        name = row["statistic"].removeprefix("lead_eV over ")
        same = figures[list(_KEYS)].eq(row[list(_KEYS)]).all(axis=1)
        error = figures[same & figures["statistic"].eq(f"error_eV of {name}")].iloc[0]
        label = name.removeprefix(BASELINE).replace(LADDER, "ladder: ")
        rows.append([_segment(row), label, f"{error['value']:.3f}", _with_ends(row)])
    return _table(["left out (state)", "instead of fewnm", "its error (eV)", "lead (eV)"], rows)


_KEYS = ("track", "split", "state")


def _coverage(figures: pd.DataFrame) -> str:
    rows = figures[figures["statistic"].eq("coverage_90") & figures["split"].isin(_PARTED)]
    rows = rows[rows["part"].str.startswith(("family", "size", "adsorbate"))]
    cells = [
        [_segment(row), row["part"], _with_ends(row), f"{row['n_groups']}", f"{row['n_rows']}"]
        for _, row in rows.iterrows()
    ]
    return _table(["left out (state)", "part", "inside", "groups", "rows"], cells)


_INTRODUCTION = f"""# How sure

Written by `make evidence` from the audit's own figures (`fewnm audit`); a test fails if this page
prints anything else. Every prediction behind it was made by a model that learned everything,
covariance parameters, source offsets, blend weights and calibration, without what it predicts.
One vote a material, metal, composition or element (a *group*); brackets are 90 % intervals:
bootstrap over groups for errors and scores, exact binomial counted in groups for coverage.

What is left out, side by side: {"; ".join(f"*{k}*: {v}" for k, v in LEFT_OUT.items())}.
"""

_WINDOWS = f"""The decision is about windows, so this comes first. Windows are fixed beforehand: the
energy axis is cut at whole multiples of {", ".join(f"{w:g}" for w in WIDTHS_eV)} eV, and every
left-out row is asked about every window that its prediction gives a chance of
{CHANCE_EDGES[0]:g} or more. The bands are where 95 % of perfect models would lie: with all rows of
a group erring together, and with rows erring independently. The truth lies between.
"""

_PERFECT = """Each statistic stands beside what a perfect model would get: truths drawn from the
predictions themselves, as many rows as there are, independent of each other. CRPS is the
continuous ranked probability score, PIT the probability integral transform (its largest distance
from a uniform distribution), hits are counted in votes over windows with a chance of 0.2 and more.
"""

_NAMED = """Too narrow, or too few groups to tell; of twenty parts of a perfect model one would be
named by chance:
"""

_DISTANCE = """Distance is that of the Gaussian process's covariance to the nearest record. *Near*
is no farther than left-out size ranges were, *edge* no farther than left-out materials were (or
a family without a record), *far* is beyond anything that was tested.
"""

_LIMITS = """## What these figures are not

They are nested, but not blind: the physics mean, the covariance terms, the smallest diameter and
the edges of the size ranges were settled after looking at left-out errors on the same tables
(`docs/decisions/`). Expect them to be somewhat kind. Part of the size records is recalled or
digitised, so part of the error is the records'.
"""


def write_pages(top: Path) -> None:
    """Write the pages of a checkout.

    Parameters
    ----------
    top : pathlib.Path
        Folder that holds ``README.md`` and ``docs``.
    """
    readme = top / "README.md"
    text = readme.read_text(encoding="utf-8")
    readme.write_text(
        _EVIDENCE.sub(lambda part: part[1] + evidence_markdown() + part[2], text), encoding="utf-8"
    )
    (top / "docs" / "how-sure.md").write_text(how_sure_markdown(), encoding="utf-8")


if __name__ == "__main__":
    write_pages(Path.cwd())
