"""One run from specification to files."""

import json
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import pandas as pd

from features.errors import SpecificationError, explain
from features.tables import read_table
from screening.fingerprint import file_hash, text_hash
from screening.laboratory import join_results
from screening.measurements import read_measurements
from screening.outputs import (
    build_manifest,
    csv_text,
    json_text,
    prepare_folder,
    write_atomically,
    write_parquet,
)
from screening.ranking import RankResult, rank
from screening.specification import Specification
from screening.tracks import track_of
from screening.trained import evidence_hash

__all__ = ["RankRun", "held_out_figures", "model_hash", "ranked", "run_rank"]


@dataclass(frozen=True)
class RankRun:
    """A finished run: its result, folder and manifest."""

    result: RankResult
    folder: Path
    manifest: dict[str, Any]


def held_out_figures() -> pd.DataFrame:
    """Return the packaged figures of the nested evaluation, if they belong to these tables.

    Returns
    -------
    pandas.DataFrame
        Columns figure, state, value, low, high, median, worst, worst_group, n_groups, n_rows;
        empty where the packaged figures were measured on other tables or another model.
    """
    figures = read_table("held_out_figures")
    current = figures[figures["evidence_hash"].eq(evidence_hash())]
    return current.drop(columns="evidence_hash").reset_index(drop=True)


def run_rank(
    specification: Specification,
    folder: Path,
    *,
    overwrite: bool = False,
    results: Path | None = None,
) -> RankRun:
    """Rank a specification and write the results.

    Parameters
    ----------
    specification : Specification
    folder : pathlib.Path
        Output folder; made if missing.
    overwrite : bool, default False
        Replace an earlier run.
    results : pathlib.Path or None, default None
        The laboratory's own results, see `screening.measurements`; read, never altered.

    Returns
    -------
    RankRun

    Raises
    ------
    OutputError
        If the folder cannot take the results.
    TableError
        If own results are faulty.
    SpecificationError, NothingQualifiesError
        As `screening.ranking.rank`; nothing is written then.
    """
    from screening.reporting.report import render_report  # noqa: PLC0415 - figures load slowly

    result = ranked(specification, results)
    table = csv_text(result.shortlist)
    prepare_folder(folder, overwrite=overwrite)
    write_atomically(folder / "shortlist.csv", table)
    write_atomically(folder / "shortlist.json", json_text(result.shortlist, "shortlist"))
    write_parquet(folder / "shortlist.parquet", result.shortlist)
    write_atomically(folder / "rejected.csv", csv_text(result.rejected))
    files = ["shortlist.csv", "shortlist.json", "shortlist.parquet", "rejected.csv"]
    if result.update is not None:
        write_atomically(folder / "own_results.csv", csv_text(result.update.results))
        files.append("own_results.csv")
    manifest = build_manifest(
        specification=specification.model_dump(mode="json"),
        model_hash=model_hash(specification, results),
        folder=folder,
        files=files,
        result_hash=text_hash(table),
        warnings=_warnings(result),
    )
    report = render_report(result, manifest, held_out_figures())
    write_atomically(folder / "report.html", report)
    write_atomically(folder / "manifest.json", json.dumps(manifest, indent=2, ensure_ascii=False))
    return RankRun(result, folder, manifest)


def ranked(specification: Specification, results: Path | None = None) -> RankResult:
    """Rank a specification, with own results joined where there are any.

    Parameters
    ----------
    specification : Specification
    results : pathlib.Path or None, default None

    Returns
    -------
    RankResult
        With ``update`` and ``before`` where results were given.

    Raises
    ------
    TableError, SpecificationError, NothingQualifiesError
        As for `run_rank`.
    """
    # What cannot be ranked is said before a model is trained for it.
    track = track_of(specification)
    track.check(specification)
    if results is None:
        return rank(specification, track.model(specification))
    if specification.target.quantity not in {"emission", "optical_gap"}:
        raise SpecificationError(
            explain(
                "own results cannot be used for this target",
                where=results.name,
                expected="a target emission or optical_gap",
            )
        )
    measured = read_measurements(results)
    model = track.model(specification)
    update = join_results(model, measured)
    before = rank(specification, model).shortlist
    return replace(rank(specification, update.model), update=update, before=before)


def model_hash(specification: Specification, results: Path | None = None) -> str:
    """Return the hash of all that the model of a run follows from, own results included."""
    plain = track_of(specification).model_hash(specification)
    return plain if results is None else text_hash(plain + file_hash(results))


def _warnings(result: RankResult) -> list[str]:
    """Say what a reader should know before acting."""
    notes = result.track.warnings(result)
    if result.update is not None:
        notes += result.update.findings
    if result.shortlist["chance_in_window"].iloc[0] < 0.5:
        notes.append("no candidate is more likely to hit the window than to miss it")
    return notes
