"""The audit: nested left-out figures of the emission track, written and shown."""

import json
from pathlib import Path

import pandas as pd

from features.size_gap import training_rows
from screening.dot_evaluation import evaluate_dots, summarise
from screening.outputs import (
    SCHEMA_VERSION,
    csv_text,
    prepare_folder,
    write_atomically,
    write_parquet,
)
from screening.trained import evidence_hash

__all__ = ["audit_text", "run_audit"]


def run_audit(folder: Path, *, n_jobs: int = 1, overwrite: bool = False) -> pd.DataFrame:
    """Evaluate on left-out groups and write predictions, figures and a manifest.

    Parameters
    ----------
    folder : pathlib.Path
        Output folder; made if missing.
    n_jobs : int, default 1
        Workers; the figures do not depend on it.
    overwrite : bool, default False

    Returns
    -------
    pandas.DataFrame
        As `screening.dot_evaluation.summarise`, with the hash of tables and model format first.

    Raises
    ------
    OutputError
        If the folder cannot take the results.
    """
    prepare_folder(folder, overwrite=overwrite)
    predictions = evaluate_dots(training_rows(), n_jobs=n_jobs)
    figures = summarise(predictions)
    figures.insert(0, "evidence_hash", evidence_hash())
    write_parquet(folder / "predictions.parquet", predictions)
    write_atomically(folder / "held_out_figures.csv", csv_text(figures))
    content = {"schema_version": SCHEMA_VERSION, "kind": "audit", "hash": evidence_hash()}
    write_atomically(folder / "manifest.json", json.dumps(content, indent=2))
    return figures


def audit_text(figures: pd.DataFrame) -> str:
    """Return the figures as a plain table."""
    columns = ["figure", "state", "value", "low", "high", "median", "worst", "worst_group"]
    return str(figures[[*columns, "n_groups"]].round(3).to_string(index=False))
