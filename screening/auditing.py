"""The audit as one run: predictions of left-out groups, figures, words, report, manifest."""

import json
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from features.size_gap import size_gap_rows, training_rows
from screening.adsorption_audit import evaluate_adsorption
from screening.adsorption_pure import PureSurfaceModel, pure_rows
from screening.audit_warnings import adsorption_warnings, blend_warnings, emission_warnings
from screening.audit_words import (
    Target,
    distance_words,
    parsed,
    targets,
    under_coverage_words,
    verdicts,
)
from screening.audited import audited_figures
from screening.dot_evaluation import evaluate_splits, summarise
from screening.dots import SizeGapModel
from screening.fingerprint import file_hash, tables_hash
from screening.left_out import adsorption_table, emission_table
from screening.outputs import (
    SCHEMA_VERSION,
    build_manifest,
    csv_text,
    prepare_folder,
    write_atomically,
    write_parquet,
)
from screening.own_table import read_own_records
from screening.trained import DOT_TABLES, evidence_hash

__all__ = ["AUDIT_TABLES", "Audit", "audit_hash", "audit_text", "run_audit", "write_audit"]

AUDIT_TABLES = (
    *DOT_TABLES,
    "adsorption_alloys",
    "adsorption_ensembles",
    "adsorption_pure",
    "metal_surfaces",
    "metals",
)
"""Tables that the audited figures follow from."""

_FILES = ("predictions.parquet", "held_out_figures.csv", "audit.json", "audit.html")


@dataclass(frozen=True)
class Audit:
    """What an audit found.

    Parameters
    ----------
    title : str
    table : pandas.DataFrame
        Every left-out prediction (`screening.left_out`).
    figures : pandas.DataFrame
        As `screening.audited.audited_figures`.
    headline : pandas.DataFrame
        As `screening.dot_evaluation.summarise`; empty for a user's own table.
    warnings : tuple of str
    tables_hash : str
        Of the tables and model format that were measured.
    """

    title: str
    table: pd.DataFrame
    figures: pd.DataFrame
    headline: pd.DataFrame
    warnings: tuple[str, ...]
    tables_hash: str

    @property
    def targets(self) -> list[Target]:
        """The program's promises, held against the figures."""
        return targets(parsed(self.figures))

    @property
    def sentences(self) -> dict[str, list[str]]:
        """What the figures say, by subject."""
        figures = parsed(self.figures)
        return {
            "baselines": verdicts(figures),
            "under-coverage": under_coverage_words(figures),
            "distance to the data": distance_words(figures),
        }


def audit_hash() -> str:
    """Return the hash of the tables and model format that the audited figures belong to."""
    return tables_hash(AUDIT_TABLES)[:16]


def run_audit(
    folder: Path, *, own: Path | None = None, n_jobs: int = 1, overwrite: bool = False
) -> Audit:
    """Evaluate on left-out groups and write predictions, figures, report and manifest.

    Parameters
    ----------
    folder : pathlib.Path
        Output folder; made if missing.
    own : pathlib.Path or None, default None
        A user's table of measured sizes, audited instead of the packaged records, which train.
    n_jobs : int, default 1
        Workers; the figures do not depend on it.
    overwrite : bool, default False

    Returns
    -------
    Audit

    Raises
    ------
    OutputError
        If the folder cannot take the results.
    TableError
        If the user's table does not fit; nothing is written then.
    """
    records = None if own is None else read_own_records(own)
    prepare_folder(folder, overwrite=overwrite)
    audit = _packaged(n_jobs) if records is None else _own(records, n_jobs)
    write_audit(audit, folder)
    return audit


def _packaged(n_jobs: int) -> Audit:
    rows = training_rows()
    predictions = evaluate_splits(rows, n_jobs=n_jobs)
    adsorption = evaluate_adsorption(n_jobs=n_jobs)
    table = pd.concat([emission_table(predictions), adsorption_table(adsorption)])
    nested = predictions["split"].isin(["size ranges", "materials"])
    return Audit(
        "Audit of both tracks on left-out groups",
        _typed(table),
        audited_figures(table, n_jobs=n_jobs),
        summarise(predictions[nested]),
        tuple(_warnings(rows, adsorption)),
        audit_hash(),
    )


def _own(records: pd.DataFrame, n_jobs: int) -> Audit:
    """Audit a user's records; the packaged ones train with them, the splits leave both out."""
    packaged = training_rows()
    rows = pd.concat([packaged, size_gap_rows(records)], ignore_index=True)
    judged = pd.Series(np.arange(len(rows)) >= len(packaged))
    table = emission_table(evaluate_splits(rows, judged=judged, n_jobs=n_jobs))
    return Audit(
        f"Audit of {len(records)} records of the user's own",
        _typed(table),
        audited_figures(table, fewest_groups=1, n_jobs=n_jobs),
        pd.DataFrame(),
        tuple(emission_warnings(SizeGapModel().fit(rows).calibrate())),
        audit_hash(),
    )


def _typed(table: pd.DataFrame) -> pd.DataFrame:
    """Give columns that one track lacks a type that a file can hold."""
    kept = table.reset_index(drop=True)
    return kept.astype({"family_on_record": "boolean"})


def _warnings(rows: pd.DataFrame, adsorption: Mapping[str, pd.DataFrame]) -> list[str]:
    found = emission_warnings(SizeGapModel().fit(rows).calibrate())
    found += adsorption_warnings(PureSurfaceModel().fit(pure_rows()))
    for weight in sorted(set(adsorption["compositions"]["gaussian_weight"])):
        found += blend_warnings(weight, "adsorption on alloys, a fold of compositions")
    return found


def write_audit(audit: Audit, folder: Path) -> None:
    """Write the files of an audit into a folder that exists.

    Parameters
    ----------
    audit : Audit
    folder : pathlib.Path
    """
    from screening.reporting.audit_figures import audit_pictures  # noqa: PLC0415 - loads slowly
    from screening.reporting.audit_report import render_audit  # noqa: PLC0415 - as above

    pictures = audit_pictures(audit.table, audit.figures)
    names = [f"{picture.key}.svg" for picture in pictures]
    write_parquet(folder / "predictions.parquet", audit.table)
    write_atomically(folder / "held_out_figures.csv", csv_text(_packaged_rows(audit)))
    write_atomically(folder / "audit.json", _json(audit))
    write_atomically(folder / "audit.html", render_audit(audit, pictures))
    for name, picture in zip(names, pictures, strict=True):
        write_atomically(folder / name, picture.svg)
    manifest = build_manifest(
        specification={"title": audit.title, "splits": sorted(set(audit.table["split"]))},
        model_hash=audit.tables_hash,
        folder=folder,
        files=[*_FILES, *names],
        result_hash=file_hash(folder / "held_out_figures.csv"),
        warnings=list(audit.warnings),
    )
    manifest |= {"kind": "audit", "hash": evidence_hash()}
    write_atomically(folder / "manifest.json", json.dumps(manifest, indent=2, ensure_ascii=False))


def _packaged_rows(audit: Audit) -> pd.DataFrame:
    """Return all figures as rows of the packaged table, each with the hash of its tables."""
    parts = [(evidence_hash(), audit.headline), (audit.tables_hash, audit.figures)]
    return pd.concat([part.assign(evidence_hash=key) for key, part in parts if len(part)])[
        ["evidence_hash", *audit.figures.columns]
    ]


def _json(audit: Audit) -> str:
    rows = json.loads(audit.figures.to_json(orient="records", double_precision=9))
    content: dict[str, Any] = {
        "schema_version": SCHEMA_VERSION,
        "kind": "audit",
        "title": audit.title,
        "hash": audit.tables_hash,
        "targets": [asdict(target) for target in audit.targets],
        "sentences": audit.sentences,
        "warnings": list(audit.warnings),
        "figures": rows,
    }
    return json.dumps(content, indent=2, ensure_ascii=False, allow_nan=False)


_SUMMARY = {
    "mean_absolute_error_eV": "error_eV",
    "root_mean_square_error_eV": "rms_eV",
    "coverage_50": "in_50",
    "coverage_80": "in_80",
    "coverage_90": "in_90",
    "mean_width_90_eV": "width_90_eV",
    "crps_eV": "crps_eV",
}


def audit_text(audit: Audit) -> str:
    """Return one line a track, split and state as a plain table."""
    figures = parsed(audit.figures)
    whole = figures[figures["part"].eq("") & figures["statistic"].isin(list(_SUMMARY))]
    keys = ["track", "split", "state"]
    wide = whole.pivot_table(index=keys, columns="statistic", values="value", sort=False)
    wide = wide.rename(columns=_SUMMARY).reindex(columns=list(_SUMMARY.values()))
    wide.insert(0, "groups", whole.groupby(keys)["n_groups"].first())
    return str(wide.round(3).reset_index().rename_axis(columns=None).to_string(index=False))
