"""One HTML file for a meeting: verdict, shortlist, pictures, how sure, sources, manifest.

The skeleton is common; each track fills its blocks (`screening.tracks.Sections`).
"""

import base64
import hashlib
import json
from collections.abc import Mapping
from importlib.resources import files
from typing import Any

import pandas as pd
from jinja2 import Environment, FunctionLoader
from markupsafe import Markup

from screening.ranking import RankResult
from screening.reporting.cells import plain_rows, short

__all__ = ["render_report"]


def _part(name: str) -> str:
    return (files("screening.reporting") / name).read_text(encoding="utf-8")


def _content_hash(text: str) -> str:
    digest = hashlib.sha256(text.encode("utf-8")).digest()
    return f"sha256-{base64.b64encode(digest).decode('ascii')}"


def render_report(result: RankResult, manifest: Mapping[str, Any], evidence: pd.DataFrame) -> str:
    """Return the report of a run as one self-contained HTML page.

    Parameters
    ----------
    result : RankResult
    manifest : mapping
        As from `screening.outputs.build_manifest`.
    evidence : pandas.DataFrame
        Left-out figures as from `screening.running.held_out_figures`; may be empty.

    Returns
    -------
    str
        HTML with a content-security policy that allows no network and only its own style and
        script.
    """
    style, script = _part("style.css"), _part("script.js")
    environment = Environment(
        autoescape=True, trim_blocks=True, lstrip_blocks=True, loader=FunctionLoader(_part)
    )
    environment.filters["short"] = short
    sections = result.track.sections(result, evidence)
    page = environment.get_template(sections.template)
    return str(
        page.render(
            title=result.specification.title,
            rejected=plain_rows(_likeliest_first(result.rejected)),
            manifest=json.dumps(manifest, indent=2, ensure_ascii=False),
            warnings=manifest.get("warnings", []),
            style=Markup(style),  # noqa: S704 - a file of this package
            script=Markup(script),  # noqa: S704 - a file of this package
            style_hash=_content_hash(style),
            script_hash=_content_hash(script),
            **sections.values,
        )
    )


def _likeliest_first(rejected: pd.DataFrame) -> pd.DataFrame:
    """Put what would have hit the window most likely first, and nothing but numbers in doubt."""
    numbers = rejected.assign(
        chance=pd.to_numeric(rejected["chance"]),
        chance_in_window=pd.to_numeric(rejected["chance_in_window"]),
    )
    return numbers.sort_values("chance_in_window", ascending=False, kind="stable")
