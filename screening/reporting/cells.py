"""Text of cells and lists that both tracks print."""

import unicodedata
from typing import Any

import pandas as pd

from features.tables import read_table

__all__ = ["cited", "plain_rows", "short"]

_LONGEST_CELL = 400


def short(text: object) -> str:
    """Cut a cell and drop characters that only steer the direction or join of others."""
    cell = "".join(mark for mark in str(text) if unicodedata.category(mark) != "Cf")
    return cell if len(cell) <= _LONGEST_CELL else f"{cell[:_LONGEST_CELL]}…"


def plain_rows(frame: pd.DataFrame) -> list[dict[str, Any]]:
    """Return a frame as rows for a template."""
    return [{str(name): value for name, value in row.items()} for row in frame.to_dict("records")]


def cited(used: pd.DataFrame) -> list[dict[str, Any]]:
    """Cite the sources of rows, and say how many figures were recalled.

    Parameters
    ----------
    used : pandas.DataFrame
        Columns source, material, from_memory.

    Returns
    -------
    list of dict
        Keys source, materials, citation, recalled.
    """
    citations = read_table("sources").set_index("source")["citation"]
    rows = []
    for source, part in used.groupby("source", sort=True):
        recalled = int(part["from_memory"].astype(bool).sum())
        rows.append(
            {
                "source": source,
                "materials": ", ".join(map(short, sorted(set(part["material"])))),
                "citation": citations.get(source, "a table of the user's own"),
                "recalled": f"{recalled} of {len(part)} figures" if recalled else "",
            }
        )
    return rows
