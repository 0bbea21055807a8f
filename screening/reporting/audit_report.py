"""The audit as one HTML file: verdict, reliability, promises, figures, warnings, method."""

from importlib.resources import files
from typing import TYPE_CHECKING, Any

import pandas as pd
from jinja2 import Environment
from markupsafe import Markup

from screening.audit_words import LEFT_OUT, parsed
from screening.reporting.audit_figures import Picture
from screening.reporting.page_parts import content_hash, short
from screening.window_reliability import CHANCE_EDGES, WIDTHS_eV

if TYPE_CHECKING:
    from screening.auditing import Audit

__all__ = ["render_audit"]

_STATISTICS = {
    "mean_absolute_error_eV": "mean absolute error (eV)",
    "root_mean_square_error_eV": "root-mean-square error (eV)",
    "coverage_50": "share inside 50 %",
    "coverage_80": "share inside 80 %",
    "coverage_90": "share inside 90 %",
    "crps_eV": "ranked probability score (eV)",
    "interval_score_90_eV": "interval score, 90 % (eV)",
    "pit_distance": "distance of the transform from uniform",
    "brier_score": "Brier score of the windows",
    "observed_hits": "hits in windows of chance 0.2 and more",
}
"""Statistics of the main table and their names there."""


def render_audit(audit: "Audit", pictures: list[Picture]) -> str:
    """Return the audit as one self-contained HTML page.

    Parameters
    ----------
    audit : Audit
    pictures : list of Picture
        As from `screening.reporting.audit_figures.audit_pictures`.

    Returns
    -------
    str
        HTML with a content-security policy that allows no network, no script and only its own
        style.
    """
    package = files("screening.reporting")
    style = (package / "style.css").read_text(encoding="utf-8")
    environment = Environment(autoescape=True, trim_blocks=True, lstrip_blocks=True)
    environment.filters["short"] = short
    environment.filters["number"] = _number
    page = environment.from_string((package / "audit.html.j2").read_text(encoding="utf-8"))
    figures = parsed(audit.figures)
    return str(
        page.render(
            title=audit.title,
            verdict=_verdict(audit),
            targets=audit.targets,
            sentences=audit.sentences,
            warnings=audit.warnings,
            pictures=[_shown(picture) for picture in pictures],
            statistics=_statistics(figures),
            left_out=LEFT_OUT,
            widths=", ".join(f"{width:g}" for width in WIDTHS_eV),
            lowest_chance=CHANCE_EDGES[0],
            n_predictions=len(audit.table),
            tables_hash=audit.tables_hash,
            style=Markup(style),  # noqa: S704 - a file of this package
            style_hash=content_hash(style),
        )
    )


def _verdict(audit: "Audit") -> str:
    kept = sum(target.reached for target in audit.targets)
    text = f"{kept} of {len(audit.targets)} promises are kept by these figures."
    missed = [target.promise for target in audit.targets if not target.reached]
    return f"{text} Not kept: {'; '.join(missed)}." if missed else text


def _shown(picture: Picture) -> dict[str, Any]:
    return {
        "title": picture.title,
        "caption": picture.caption,
        "svg": Markup(picture.svg),  # noqa: S704 - drawn here, names escaped
        "columns": list(picture.numbers.columns),
        "rows": picture.numbers.to_numpy().tolist(),
    }


def _statistics(figures: pd.DataFrame) -> list[dict[str, Any]]:
    """Return each statistic of each segment beside a perfect model's."""
    whole = figures[figures["part"].eq("")]
    rows = []
    for (track, split, state), part in whole.groupby(["track", "split", "state"], sort=False):
        own = part.set_index("statistic")
        for name, label in _STATISTICS.items():
            if name in own.index:
                ideal = f"perfect model: {name}"
                rows.append(
                    {
                        "segment": f"{track}, {split} ({state})",
                        "statistic": label,
                        "own": own.loc[name],
                        "perfect": own.loc[ideal] if ideal in own.index else None,
                    }
                )
    return rows


def _number(value: object) -> str:
    """Write a number with three decimals, a count as it is, anything else as text."""
    if isinstance(value, float):
        return "-" if pd.isna(value) else f"{value:.0f}" if value.is_integer() else f"{value:.3f}"
    return short(value)
