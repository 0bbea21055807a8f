"""The table of left-out figures that the README prints, made from the packaged evidence."""

from collections.abc import Hashable
from typing import Any

from features.tables import read_table

__all__ = ["evidence_markdown"]

_ROWS = {
    "mean_absolute_error_eV": "mean absolute error (eV)",
    "mean_absolute_error_eV, without low-confidence records": (
        "the same, low-confidence records out (eV)"
    ),
    "error_expected_from_assigned_noise_eV": (
        "error to expect from the noise assigned to the records (eV)"
    ),
    "coverage_90": "share inside the 90 % interval",
    "mean_width_90_eV": "mean width of the 90 % interval (eV)",
    "mean_absolute_error_eV, Brus 1984": "error of the Brus formula (eV)",
    "mean_absolute_error_eV, finite barrier": "error of finite barriers with Coulomb term (eV)",
    "mean_absolute_error_eV, two-band": "error of the two-band model (eV)",
    "mean_absolute_error_eV, nearest material's curve": (
        "error of the nearest material's curve (eV)"
    ),
    "mean_absolute_error_eV, linear size law": "error of a linear size law (eV)",
    "mean_absolute_error_eV, plain boosted trees": "error of plain boosted trees (eV)",
}


def evidence_markdown() -> str:
    """Return the figures as a Markdown table.

    Returns
    -------
    str
        One row a figure; both states as columns, the 90 % interval of each figure in brackets.
    """
    table = read_table("held_out_figures")
    figures = {(row["figure"], row["state"]): row for row in table.to_dict("records")}
    lines = ["| figure | new material | material on record |", "|---|---|---|"]
    for key, label in _ROWS.items():
        cells = [_cell(figures, key, state) for state in ("new", "on record")]
        lines.append(f"| {label} | {cells[0]} | {cells[1]} |")
    groups = [int(figures["coverage_90", s]["n_groups"]) for s in ("new", "on record")]
    lines.append(f"| materials | {groups[0]} | {groups[1]} |")
    return "\n".join(lines)


def _cell(figures: dict[tuple[str, str], dict[Hashable, Any]], key: str, state: str) -> str:
    if (key, state) not in figures:
        return "-"
    row = figures[key, state]
    return f"{row['value']:.2f} ({row['low']:.2f} to {row['high']:.2f})"
