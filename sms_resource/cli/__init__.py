"""The commands: the only place that prints, asks and exits."""

from __future__ import annotations

import gc
import os
import sys
from pathlib import Path
from typing import Annotated, Any, NoReturn

import typer

from sms_resource import __version__, second
from sms_resource.cli.printing import (
    Lines,
    Stoppable,
    console_of,
    print_findings,
    print_guesses,
    print_json,
    print_summary,
)

DONE, FAULTY, USAGE, INTERRUPTED = 0, 1, 2, 130

app = typer.Typer(
    name="sms-resource",
    help="Estimate tonnes and grades of a seafloor massive sulphide deposit, with every assumption visible.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
)

StudyArgument = Annotated[Path, typer.Argument(help="The study file (TOML).", show_default=False)]
OutOption = Annotated[Path, typer.Option("--out", "-o", help="Folder of the results.")]
JsonOption = Annotated[bool, typer.Option("--json", help="Print the findings as JSON and nothing else.")]
QuietOption = Annotated[bool, typer.Option("--quiet", "-q", help="Print findings of errors only.")]
ThreadsOption = Annotated[
    int | None,
    typer.Option("--threads", min=1, help="Threads; all cores if not given. Results do not depend on it."),
]
CacheOption = Annotated[
    bool, typer.Option("--cache/--no-cache", help="Use outputs of stages that were made before.")
]


def _version(wanted: bool) -> None:
    if wanted:
        typer.echo(__version__)
        raise typer.Exit(DONE)


@app.callback()
def common(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version and leave.")
    ] = False,
) -> None:
    """Estimate tonnes and grades of a seafloor massive sulphide deposit, with every assumption visible."""


@app.command()
def new(
    files: Annotated[list[Path], typer.Argument(help="The data files, in any order.", show_default=False)],
    out: Annotated[Path, typer.Option("--out", "-o", help="Study file to write.")] = Path("study.toml"),
    force: Annotated[bool, typer.Option("--force", help="Replace a file that exists.")] = False,
) -> None:
    """Write a commented study file from data files: guesses columns, units and coordinate system, and says so."""
    from sms_resource.workflow import new_study

    if out.exists() and not force:
        _fail_usage(f"{out} exists; give another name with --out, or --force to replace it")
    missing = [str(path) for path in files if not path.is_file()]
    if missing:
        _fail_usage(f"no such file: {', '.join(missing)}")
    made = new_study(files, out)
    console = console_of()
    console.print(f"Wrote {out}", highlight=False, markup=False)
    print_guesses(console, made.guesses)
    if made.open_questions:
        console.print("\nTo decide before a run (each is marked in the file):", markup=False)
        for question in made.open_questions:
            console.print(f"  - {question}", highlight=False, markup=False)
    console.print(f"\nNext: sms-resource check {out}", highlight=False, markup=False)


@app.command()
def check(study: StudyArgument, as_json: JsonOption = False, quiet: QuietOption = False) -> None:
    """Read the study and its data, and list everything that is wrong with them."""
    from sms_resource.workflow import check_study

    loaded = _load(study, as_json)
    findings = check_study(loaded)
    if as_json:
        print_json(findings.to_records())
    else:
        console = console_of()
        print_findings(console, findings, quiet)
        counts = findings.counts()
        console.print(
            f"{counts['error']} errors, {counts['warning']} warnings, {counts['note']} notes", highlight=False
        )
    raise typer.Exit(FAULTY if findings.has_errors else DONE)


@app.command()
def run(
    study: Annotated[Path | None, typer.Argument(help="The study file (TOML).", show_default=False)] = None,
    out: OutOption = Path("results"),
    as_json: JsonOption = False,
    quiet: QuietOption = False,
    threads: ThreadsOption = None,
    cache: CacheOption = True,
    against: Annotated[
        Path | None,
        typer.Option(help="Results of another run; the report tells what changed since, and why."),
    ] = None,
    verify: Annotated[
        Path | None, typer.Option(help="Run the study of these results again and compare every byte.")
    ] = None,
) -> None:
    """Run the whole estimate, from files to the draft report."""
    if verify is not None:
        _verify(verify, as_json, quiet, threads)
    if study is None:
        _fail_usage("give a study file, or --verify RESULTS")
    _run(study, out, as_json, quiet, threads, cache, against=against)


@app.command()
def scenarios(
    study: StudyArgument,
    out: OutOption = Path("results"),
    as_json: JsonOption = False,
    quiet: QuietOption = False,
    threads: ThreadsOption = None,
    cache: CacheOption = True,
) -> None:
    """Run the estimate, its scenarios and the alternatives of its decisions; the ledger tells what each does."""
    _run(study, out, as_json, quiet, threads, cache, scenarios=True)


@app.command()
def export(
    results: Annotated[Path, typer.Argument(help="Folder of results of a run.")] = Path("results"),
    out: Annotated[Path, typer.Option("--out", "-o", help="Folder to write to.")] = Path("exchange"),
    formats: Annotated[
        list[str] | None,
        typer.Option(
            "--format", "-f", help="parquet, csv, vtu, vti, gpkg, geotiff, netcdf or omf; all if not given."
        ),
    ] = None,
) -> None:
    """Hand the block model and its layers on in open formats."""
    from sms_resource.workflow import export_results

    try:
        written, findings = export_results(results, out, tuple(formats or ()))
    except (FileNotFoundError, ValueError) as error:
        _fail_usage(str(error))
    console = console_of()
    print_findings(console, findings, quiet=False)
    for path in written:
        console.print(str(path), highlight=False, markup=False, soft_wrap=True)


@app.command()
def cache(
    clear: Annotated[bool, typer.Option("--clear", help="Remove everything that is kept.")] = False,
    shrink_to: Annotated[
        float | None,
        typer.Option(
            "--shrink-to",
            min=0.0,
            help="Remove what was used least recently until this many gigabytes are left.",
        ),
    ] = None,
) -> None:
    """Show how much is kept of earlier runs, and where; or remove it.

    Runs keep at most 2 GB; the variable SMS_RESOURCE_CACHE_GB sets another limit, 0 keeps nothing. SMS_RESOURCE_CACHE names
    another folder.
    """
    from sms_resource.cache import StageCache, limit_fault

    if limit_fault():
        _fail_usage(limit_fault())
    store = StageCache()
    if clear:
        typer.echo(f"Removed {store.clear()} entries from {store.folder}")
        return
    if shrink_to is not None:
        removed = StageCache(store.folder, limit_bytes=int(shrink_to * 1e9)).evict()
        typer.echo(f"Removed {removed} entries from {store.folder}")
    count, size = store.size()
    typer.echo(
        f"{count} entries, {size / 1e6:.1f} MB of at most {store.limit_bytes / 1e6:.0f} MB, in {store.folder}"
    )


def _run(
    study: Path,
    out: Path,
    as_json: bool,
    quiet: bool,
    threads: int | None,
    cache: bool,
    *,
    scenarios: bool = False,
    against: Path | None = None,
) -> None:
    """Run a study, print what it found and leave with the code that tells how it went."""
    from sms_resource.reporting import ahead

    ahead.begin(out if cache else None)  # before the slow imports
    from sms_resource.study import StudyError
    from sms_resource.workflow import NotResultsError, run_study
    from sms_resource.workflow.stage import Silent

    if against is not None and not (against / "manifest.json").is_file():
        _fail_usage(f"{against} holds no results")
    loaded = _load(study, as_json)
    _warn_of_cache(cache)
    console = console_of(stderr=as_json)
    progress = Stoppable(Silent() if as_json or quiet else Lines(console))
    try:
        result = run_study(
            loaded, out, progress=progress, threads=threads, cache=cache, scenarios=scenarios, against=against
        )
    except StudyError as error:
        _leave_faulty(error.findings, as_json)
    except MemoryError:
        _fail_usage("not enough memory; choose larger blocks.size_m or body.cell_m, or a smaller outline")
    except NotResultsError as error:
        _fail_usage(f"{error}; give another folder with --out")
    except OSError as error:
        # Without a file's name it is no file that failed: a library could not be loaded, or a thread not started.
        what = "the results cannot be written" if error.filename else "the run stopped, memory may be short"
        _fail_usage(f"{what}: {error}")
    finally:
        progress.close()
    if as_json:
        print_json(result.findings.to_records())
    else:
        print_findings(console, result.findings, quiet=True)
        if not quiet:
            print_summary(console, result)
    raise typer.Exit(FAULTY if result.findings.has_errors else DONE)


@app.command()
def view(
    results: Annotated[Path, typer.Argument(help="Folder of results of a run.")] = Path("results"),
    screenshot: Annotated[
        Path | None, typer.Option(help="Draw into this PNG file instead of a window.")
    ] = None,
    variable: Annotated[str | None, typer.Option(help="Grade to colour by, such as cu or cu_pct.")] = None,
    cutoff: Annotated[float | None, typer.Option(help="Show blocks at or above this grade.")] = None,
    exaggeration: Annotated[float, typer.Option(min=0.1, max=50, help="Vertical exaggeration.")] = 1.0,
    colour: Annotated[
        str | None, typer.Option(help="Column that colours the blocks, such as domain.")
    ] = None,
    section: Annotated[
        float | None, typer.Option(help="Azimuth of a plane that opens the blocks (degrees).")
    ] = None,
    frame: Annotated[
        str, typer.Option(help="elevation, depth (seafloor laid flat) or proportional (base laid flat too).")
    ] = "elevation",
    screens: Annotated[
        bool, typer.Option("--screens/--no-screens", help="Leave out what screens took.")
    ] = True,
    hide: Annotated[
        list[str] | None,
        typer.Option(help="Layer to hide: seafloor, base, body, blocks, holes, names, or a domain."),
    ] = None,
) -> None:
    """Open the seafloor, the blocks above a cut-off and the holes in a window."""
    from sms_resource.workflow import view_results

    try:
        message = view_results(
            results,
            screenshot=screenshot,
            variable=variable,
            cutoff=cutoff,
            exaggeration=exaggeration,
            colour=colour,
            section=section,
            frame=frame,
            screened=screens,
            **({"hide": tuple(hide)} if hide else {}),
        )
    except FileNotFoundError as error:
        _fail_usage(str(error))
    if message:
        typer.echo(message, err=True)
        raise typer.Exit(FAULTY)
    if screenshot:
        typer.echo(f"Wrote {screenshot}")


def _verify(results: Path, as_json: bool, quiet: bool, threads: int | None) -> NoReturn:
    """Run results again and say whether the bytes are the same."""
    from sms_resource.workflow import NotResultsError, verify_results
    from sms_resource.workflow.stage import Silent

    if not (results / "manifest.json").is_file():
        _fail_usage(f"{results} holds no results")
    console = console_of(stderr=as_json)
    try:
        found = verify_results(
            results, progress=Silent() if as_json or quiet else Lines(console), threads=threads
        )
    except NotResultsError as error:
        _fail_usage(str(error))
    if as_json:
        print_json({"same": found.same, "differing": found.differing, "causes": found.causes,
                     "findings": found.findings.to_records()})  # fmt: skip
    else:
        print_findings(console, found.findings, quiet=True)
        console.print(
            "The same bytes." if found.same else f"{len(found.differing)} outputs differ:", highlight=False
        )
        for name in [] if found.same else found.differing:
            console.print(f"  {name}", highlight=False, markup=False)
        for cause in found.causes:
            console.print(f"  {cause}", highlight=False, markup=False)
    raise typer.Exit(DONE if found.same else FAULTY)


def _warn_of_cache(used: bool) -> None:
    """One line where the limit of the cache cannot be read: the run goes on with the usual one."""
    from sms_resource.cache import DEFAULT_LIMIT_BYTES, limit_fault

    if used and limit_fault():
        typer.echo(f"sms-resource: {limit_fault()}; {DEFAULT_LIMIT_BYTES / 1e9:g} GB is taken", err=True)


def _fail_usage(message: str) -> NoReturn:
    typer.echo(f"sms-resource: {message}", err=True)
    raise typer.Exit(USAGE)


def _load(path: Path, as_json: bool) -> Any:
    """The study, or the list of its faults and exit 1."""
    from sms_resource.study import StudyError, load_study

    try:
        return load_study(path)
    except StudyError as error:
        _leave_faulty(error.findings, as_json)


def _leave_faulty(findings: Any, as_json: bool) -> NoReturn:
    """Print the faults of a study and leave with exit 1."""
    if as_json:
        print_json(findings.to_records())
    else:
        print_findings(console_of(stderr=True), findings, quiet=False)
    raise typer.Exit(FAULTY) from None


def main() -> None:
    """Run the command line; a fault of the user never shows a traceback."""
    code: Any = DONE
    gc.set_threshold(50_000, 20, 50)  # little litter is made, and looking for it took a tenth of a second
    os.environ.update(second.ONE_THREAD)
    for name in ("stdout", "stderr"):  # whoever closed one wants no words on it
        if getattr(sys, name) is None:
            setattr(sys, name, os.fdopen(os.open(os.devnull, os.O_WRONLY), "w"))
    try:
        try:
            app()
        except KeyboardInterrupt:
            code = INTERRUPTED
        except SystemExit as leaving:
            code = leaving.code
        if code == INTERRUPTED:
            sys.stderr.write("sms-resource: stopped; earlier results are as they were\n")
        sys.stdout.flush()
        sys.stderr.flush()
    except BrokenPipeError:
        code = DONE  # the reader has seen enough
    second.stop()
    # Everything is written: the system takes the memory back at once, the interpreter would need a third of a second.
    os._exit(code if isinstance(code, int) else DONE if code is None else FAULTY)
