"""The command line: thin, quick to answer, heavy libraries loaded inside the commands.

Exit codes: 0 done; 1 a bug; 2 usage; 3 bad input data; 4 bad specification; 5 ran, but nothing
qualifies or a gate failed; 130 interrupted.
"""

import sys
from collections.abc import Callable
from functools import wraps
from pathlib import Path
from typing import Annotated, Any, Literal

import typer

from features.errors import (
    FewnmError,
    NothingQualifiesError,
    OutputError,
    SpecificationError,
)

__all__ = ["app", "main"]

_EPILOG = (
    "Exit codes: 0 done; 1 a bug; 2 usage; 3 bad input data; 4 bad specification; "
    "5 ran, but nothing qualifies or a gate failed; 130 interrupted."
)

app = typer.Typer(
    name="fewnm",
    no_args_is_help=True,
    add_completion=True,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    epilog=_EPILOG,
    context_settings={"help_option_names": ["-h", "--help"]},
    help=(
        "Which few (composition, size) nanoparticle samples to make, and how sure that is.\n\n"
        "Examples:\n\n"
        "  fewnm rank red-emitter --out red-run\n\n"
        "  fewnm predict CdSe 3.0"
    ),
)


def _exit_code(error: FewnmError) -> int:
    if isinstance(error, SpecificationError):
        return 4
    if isinstance(error, NothingQualifiesError):
        return 5
    return 2 if isinstance(error, OutputError) else 3


def _guarded(command: Callable[..., None]) -> Callable[..., None]:
    """Turn errors that a user can mend into one message and the documented exit code."""

    @wraps(command)
    def run(*args: Any, **kwargs: Any) -> None:
        try:
            command(*args, **kwargs)
        except FewnmError as error:
            typer.echo(f"fewnm: {error}", err=True)
            raise typer.Exit(_exit_code(error)) from None
        except KeyboardInterrupt:
            typer.echo("fewnm: interrupted; files already written are whole", err=True)
            raise typer.Exit(130) from None
        except OSError as error:
            typer.echo(f"fewnm: cannot write: {error.strerror}: {error.filename}", err=True)
            raise typer.Exit(2) from None

    return run


def _say(text: str) -> None:
    """Talk on standard error, so that standard output holds data only."""
    typer.echo(text, err=True)


class _Stage:
    """A spinner on a terminal, one plain line elsewhere."""

    def __init__(self, text: str) -> None:
        self._text = text
        self._status: Any = None

    def __enter__(self) -> None:
        if not sys.stderr.isatty():
            _say(self._text)
            return
        from rich.console import Console

        self._status = Console(stderr=True).status(self._text)
        self._status.__enter__()

    def __exit__(self, *details: object) -> None:
        if self._status is not None:
            self._status.__exit__(*details)


def _specification_path(name: str) -> Path:
    """Return the file of that name, or the packaged specification."""
    path = Path(name)
    if path.suffix == ".toml" or path.exists():
        return path
    from features.tables import packaged_path

    known = sorted(p.stem for p in packaged_path("configs").glob("*.toml"))
    if name not in known:
        from features.errors import explain

        raise SpecificationError(
            explain(
                f"no specification {name!r}",
                expected=f"a .toml file or one of {', '.join(known)}",
                do="`fewnm start` writes one to begin with",
            )
        )
    return packaged_path("configs", f"{name}.toml")


def _loaded(spec: str, results: Path | None) -> tuple[Any, Path | None]:
    """Return the specification and the file of own results, named here or in it."""
    from screening.specification import load_specification

    path = _specification_path(spec)
    specification = load_specification(path)
    named = specification.laboratory.results
    return specification, results or (path.parent / named if named else None)


@app.command(epilog=_EPILOG)
@_guarded
def rank(
    spec: Annotated[str, typer.Argument(help="Specification: a .toml file or a packaged name.")],
    out: Annotated[Path, typer.Option(help="Folder for the results; made if missing.")],
    overwrite: Annotated[bool, typer.Option(help="Replace an earlier run in the folder.")] = False,
    results: Annotated[Path | None, typer.Option(help="CSV of your own results.")] = None,
    jobs: Annotated[
        int, typer.Option(min=1, max=256, help="Worker processes for candidate spaces.")
    ] = 2,
) -> None:
    """Rank candidates and write the shortlist, the report and the manifest.

    Results (material, diameter_nm, property, value ...) join the model; the file is not altered.

    Example: fewnm rank red-emitter --out red-run
    """
    specification, own = _loaded(spec, results)
    from screening.outputs import prepare_folder
    from screening.running import run_rank

    existed = out.exists()
    if existed:
        prepare_folder(out, overwrite=overwrite)
    from joblib import parallel_config

    with _Stage(_ranking_words(specification)), parallel_config(n_jobs=jobs):
        run = run_rank(specification, out, overwrite=overwrite, results=own)
    for finding in run.result.update.findings if run.result.update else ():
        _say(f"Your results: {finding}.")
    _say(_shortlist_text(run.result))
    _say(f"Report: {run.folder / 'report.html'}")


def _ranking_words(specification: Any) -> str:
    """Say what is ranked, and how many mixtures its spaces hold."""
    if not specification.candidates.spaces:
        return f"Ranking: {specification.title}"
    from screening.candidates import size_grid
    from screening.sweep import count_mixtures

    n_mixtures = count_mixtures(specification.candidates)
    n_sizes = len(size_grid(specification.candidates))
    return (
        f"Ranking: {specification.title}: up to {n_mixtures:,} compositions at {n_sizes} sizes, "
        f"{n_mixtures * n_sizes:,} pairs"
    )


def _shortlist_text(result: Any) -> str:
    """Return the shortlist as a plain table."""
    digits = result.track.brief
    table = result.shortlist[list(digits)].round(digits)
    return str(table.to_string(index=False))


@app.command(epilog=_EPILOG)
@_guarded
def plan(
    spec: Annotated[str, typer.Argument(help="Specification: a .toml file or a packaged name.")],
    out: Annotated[Path | None, typer.Option(help="Folder for the plan; else printed.")] = None,
    samples: Annotated[int | None, typer.Option(min=1, max=100, help="Samples to propose.")] = None,
    policy: Annotated[
        Literal["hit", "approach", "edge", "teach"] | None,
        typer.Option(help="What the samples are for; else the specification's."),
    ] = None,
    results: Annotated[Path | None, typer.Option(help="CSV of your own results.")] = None,
    overwrite: Annotated[bool, typer.Option(help="Replace an earlier plan in the folder.")] = False,
) -> None:
    """Propose the next samples, with the reason of each and the chance that one lands.

    Example: fewnm plan red-emitter --samples 6
    """
    specification, own = _loaded(spec, results)
    from screening.outputs import prepare_folder
    from screening.planning_run import plan_text, planned, write_plan

    if out is not None and out.exists():
        prepare_folder(out, overwrite=overwrite)
    if policy is not None:
        chosen = specification.plan.model_copy(update={"policy": policy})
        specification = specification.model_copy(update={"plan": chosen})
    with _Stage(f"Planning: {specification.title}"):
        made = planned(specification, samples=samples, results=own)
    typer.echo(plan_text(made.table))
    if out is not None:
        write_plan(made, out, overwrite=overwrite)
        _say(f"Plan: {out / 'plan.csv'}")


@app.command(epilog=_EPILOG)
@_guarded
def rehearse(
    out: Annotated[
        Path | None, typer.Option(help="Folder for the campaigns; else printed alone.")
    ] = None,
    jobs: Annotated[int, typer.Option(min=1, max=256, help="Worker processes.")] = 2,
    overwrite: Annotated[bool, typer.Option(help="Replace an earlier rehearsal.")] = False,
) -> None:
    """Replay discovery with every material hidden in turn, for every policy.

    Takes some minutes on two cores. Example: fewnm rehearse
    """
    from screening.planning_run import rehearsal_text, run_rehearsal

    with _Stage("Hiding every material in turn"):
        figures, learned = run_rehearsal(out, n_jobs=jobs, overwrite=overwrite)
    typer.echo(rehearsal_text(figures, learned))


@app.command(epilog=_EPILOG)
@_guarded
def predict(
    material: Annotated[str | None, typer.Argument(help="Formula, for instance CdSe.")] = None,
    diameter_nm: Annotated[float | None, typer.Argument(help="Core diameter, nm, > 0.")] = None,
    table: Annotated[Path | None, typer.Option(help="CSV of many questions, see below.")] = None,
    output_format: Annotated[
        Literal["text", "json", "csv"], typer.Option("--format", help="Form of the answer.")
    ] = "text",
    size_spread: Annotated[
        float, typer.Option(min=0.001, max=0.5, help="Spread of diameters over their mean.")
    ] = 0.07,
) -> None:
    """Answer one pair, or a table of them, in the order given.

    A table asks by its columns: material, diameter_nm (optional structure, shape) for quantum
    dots; material alone for the bulk gap; material, adsorbate (optional structure, facet) for
    adsorption energies.

    Example: fewnm predict CdSe 3.0 --format json
    """
    from screening import answering

    if table is not None:
        if material is not None:
            raise typer.BadParameter("give either a material or --table, not both")
        answer = answering.answer_table(table, size_spread)
    elif material is None:
        raise typer.BadParameter("give a material and a diameter, or --table FILE")
    else:
        if diameter_nm is not None and not 0.0 < diameter_nm <= answering.LARGEST_nm:
            raise typer.BadParameter(
                f"diameter_nm: expected > 0 and at most {answering.LARGEST_nm:g} nm, "
                f"found {diameter_nm:g}"
            )
        answer = answering.answer_one(material, diameter_nm, size_spread)
    typer.echo(answering.render(answer, output_format), nl=False)


@app.command(epilog=_EPILOG)
@_guarded
def audit(
    out: Annotated[Path, typer.Option(help="Folder for predictions, figures and the report.")],
    table: Annotated[
        Path | None, typer.Option(help="CSV of your own measured sizes, see below.")
    ] = None,
    jobs: Annotated[int, typer.Option(min=1, max=256, help="Worker processes.")] = 2,
    overwrite: Annotated[bool, typer.Option(help="Replace an earlier audit.")] = False,
) -> None:
    """Measure errors, coverage and baselines on groups that were left out.

    Without a table both tracks are audited on the packaged data (three to five minutes on two
    cores). A table needs the columns material, diameter_nm (1.5 to 20), energy_eV, energy_kind
    (first absorption, absorption onset, emission or computed gap), and may have record,
    structure, shape, diameter_uncertainty_nm, energy_sd_eV and source; its rows are judged, the
    packaged ones train with them.

    Example: fewnm audit --out audit --table my-sizes.csv
    """
    from screening.auditing import audit_text, run_audit

    with _Stage("Leaving out rows, sources, sizes, materials and families in turn"):
        found = run_audit(out, own=table, n_jobs=jobs, overwrite=overwrite)
    typer.echo(audit_text(found))
    for target in found.targets:
        _say(f"{'kept' if target.reached else 'NOT KEPT'}: {target.promise}: {target.found}")
    for warning in found.warnings:
        _say(f"Warning: {warning}")
    _say(f"Report: {out / 'audit.html'}")


@app.command(epilog=_EPILOG)
@_guarded
def data(
    name: Annotated[str | None, typer.Argument(help="Table to print as CSV.")] = None,
    check: Annotated[Path | None, typer.Option(help="CSV of your own to check.")] = None,
) -> None:
    """List the tables with counts and sources, print one as CSV, or check one of your own.

    Example: fewnm data size_gap_records
    """
    if check is not None:
        if name is not None:
            raise typer.BadParameter("give either a table's name or --check, not both")
        from screening.table_check import check_text

        typer.echo(check_text(check), nl=False)
        return
    from screening.describing import data_text, table_text

    typer.echo(data_text() if name is None else table_text(name), nl=False)


@app.command(epilog=_EPILOG)
@_guarded
def start(
    file: Annotated[Path, typer.Argument(help="File to write.")] = Path("specification.toml"),
) -> None:
    """Write a commented specification to begin with; an existing file is kept.

    Example: fewnm start my-emitter.toml
    """
    from screening.describing import write_start

    write_start(file)
    _say(f"Wrote {file}; run it with: fewnm rank {file} --out my-run")


@app.command(epilog=_EPILOG)
@_guarded
def doctor() -> None:
    """Check the environment: versions, tables, cache folder.

    Example: fewnm doctor
    """
    from screening.describing import doctor_text

    typer.echo(doctor_text(), nl=False)


def main() -> None:
    """Run the command line."""
    app(prog_name="fewnm")
