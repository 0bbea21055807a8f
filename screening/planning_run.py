"""Plans and rehearsals as runs: files under one folder, and their tables as text."""

import json
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from features.size_gap import training_rows
from screening.fingerprint import text_hash
from screening.measurements import measured_rows, read_measurements
from screening.outputs import (
    SCHEMA_VERSION,
    build_manifest,
    csv_text,
    json_text,
    prepare_folder,
    write_atomically,
)
from screening.planning import plan_samples
from screening.rehearsal import rehearse, summarise_rehearsal
from screening.running import model_hash, ranked
from screening.specification import Specification
from screening.trained import evidence_hash

__all__ = [
    "PlannedRun",
    "plan_text",
    "planned",
    "rehearsal_page",
    "rehearsal_text",
    "run_rehearsal",
    "write_plan",
]


@dataclass(frozen=True)
class PlannedRun:
    """A plan and what it follows from.

    Parameters
    ----------
    table : pandas.DataFrame
        Columns `screening.planning.PLAN_COLUMNS`.
    specification : Specification
    model_hash : str
    findings : tuple of str
        What own results brought up.
    """

    table: pd.DataFrame
    specification: Specification
    model_hash: str
    findings: tuple[str, ...]


def planned(
    specification: Specification, *, samples: int | None = None, results: Path | None = None
) -> PlannedRun:
    """Choose the next samples.

    Parameters
    ----------
    specification : Specification
    samples : int or None, default None
        Number of samples; None for the specification's.
    results : pathlib.Path or None, default None
        The laboratory's own results so far.

    Returns
    -------
    PlannedRun

    Raises
    ------
    TableError, SpecificationError, NothingQualifiesError
        As for `screening.running.run_rank`.
    """
    result = ranked(specification, results)
    made = None if results is None else measured_rows(read_measurements(results))
    return PlannedRun(
        plan_samples(result, made, samples),
        specification,
        model_hash(specification, results),
        result.update.findings if result.update else (),
    )


def write_plan(plan: PlannedRun, folder: Path, *, overwrite: bool = False) -> None:
    """Write a plan as CSV and JSON with its manifest.

    Parameters
    ----------
    plan : PlannedRun
    folder : pathlib.Path
        Output folder; made if missing.
    overwrite : bool, default False
        Replace an earlier plan.

    Raises
    ------
    OutputError
        If the folder cannot take the files.
    """
    table = csv_text(plan.table)
    prepare_folder(folder, overwrite=overwrite)
    write_atomically(folder / "plan.csv", table)
    write_atomically(folder / "plan.json", json_text(plan.table, "plan"))
    manifest = build_manifest(
        specification=plan.specification.model_dump(mode="json"),
        model_hash=plan.model_hash,
        folder=folder,
        files=["plan.csv", "plan.json"],
        result_hash=text_hash(table),
        warnings=list(plan.findings),
    )
    write_atomically(folder / "manifest.json", json.dumps(manifest, indent=2, ensure_ascii=False))


def plan_text(plan: pd.DataFrame) -> str:
    """Return a plan as readable lines, one sample each."""
    lines = [
        f"{row.sample:>2}. {row.material} {row.diameter_nm:.2f} nm ({row.emission_nm:.0f} nm "
        f"emission): {row.reason}"
        for row in plan.itertuples()
    ]
    return "\n".join(lines)


def run_rehearsal(
    folder: Path | None, *, n_jobs: int = 1, overwrite: bool = False
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Replay discovery on the packaged tables and write every campaign.

    Parameters
    ----------
    folder : pathlib.Path or None
        None writes nothing.
    n_jobs : int, default 1
    overwrite : bool, default False

    Returns
    -------
    figures, learned : pandas.DataFrame
        As from `screening.rehearsal.summarise_rehearsal` and `screening.rehearsal.rehearse`.

    Raises
    ------
    OutputError
        If the folder cannot take the results.
    """
    if folder is not None:
        prepare_folder(folder, overwrite=overwrite)
    campaigns, learned = rehearse(training_rows(), n_jobs=n_jobs)
    figures = summarise_rehearsal(campaigns)
    if folder is None:
        return figures, learned
    write_atomically(folder / "campaigns.csv", csv_text(campaigns))
    write_atomically(folder / "policies.csv", csv_text(figures))
    write_atomically(folder / "after_three_samples.csv", csv_text(learned))
    write_atomically(folder / "rehearsal.md", rehearsal_page(figures, learned))
    content = {"schema_version": SCHEMA_VERSION, "kind": "rehearsal", "hash": evidence_hash()}
    write_atomically(folder / "manifest.json", json.dumps(content, indent=2))
    return figures, learned


def rehearsal_text(figures: pd.DataFrame, learned: pd.DataFrame) -> str:
    """Return both tables as text: policies, then what three samples teach."""
    columns = ["mean_absolute_error_eV", "coverage_90", "mean_width_90_eV"]
    after = learned.groupby("n_samples")[columns].mean()
    return f"{figures.round(3).to_string(index=False)}\n\n{after.round(3).to_string()}"


def rehearsal_page(figures: pd.DataFrame, learned: pd.DataFrame) -> str:
    """Return the page of a rehearsal in Markdown.

    Parameters
    ----------
    figures, learned : pandas.DataFrame
        As from `run_rehearsal`.

    Returns
    -------
    str
    """
    rows = [
        f"| {row.policy} | {row.median_samples:.1f} ({row.low:.1f} to {row.high:.1f}) | "
        f"{row.mean_samples:.1f} | {row.hits_in_budget:.1f} | {row.regret_eV:.3f} | "
        f"{row.worse_than_random:.0%} |"
        for row in figures.itertuples()
    ]
    columns = ["mean_absolute_error_eV", "coverage_90", "mean_width_90_eV"]
    after = learned.groupby("n_samples")[columns].mean()
    steps = [
        f"| {count} | {row.mean_absolute_error_eV:.3f} | {row.coverage_90:.1%} | "
        f"{row.mean_width_90_eV:.2f} |"
        for count, row in zip(after.index, after.itertuples(), strict=True)
    ]
    first = figures.iloc[0]
    return f"""# Discovery, replayed

Written by `make rehearsal` (`fewnm rehearse`). Each of {first["n_materials"]} materials with three
recorded sizes or more is hidden in turn; everything that learns does so from the others. Its own
records, made monotonic and interpolated between their smallest and largest size, stand in for the
laboratory, in steps of 0.1 nm and with 10 meV of noise. A window of 60 meV is looked for at three
places of the range and with two draws of the noise: {first["n_windows"]} campaigns a policy, those
left out in which more than half of the sizes land. Random choice is its exact expectation.

| policy | median samples (90 % band) | mean | hits in six | best of six off (eV) | behind random |
|---|---|---|---|---|---|
{chr(10).join(rows)}

*Shifted by the results* moves a prediction by the mean error of the samples so far, which a careful
worker would do by hand. `teach` is meant to learn the law, not to hit.

## What three samples teach

| samples | mean absolute error (eV) | inside the 90 % interval | mean width (eV) |
|---|---|---|---|
{chr(10).join(steps)}

Over the sizes that were not made, one vote a material. The hidden laws are interpolated records,
so these figures are of invented laboratories, not of new measurements.
"""
