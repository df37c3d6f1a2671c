"""The commands; see ``ledgersolve --help``.

Each command loads what it needs itself: help and version answer at once.
"""

import gc
import json
import logging
import shutil
import sys
from pathlib import Path
from typing import Annotated, NoReturn

import typer

from ledgersolve import __version__
from ledgersolve.service.child import FEW_COLLECTIONS

app = typer.Typer(
    name="ledgersolve",
    no_args_is_help=True,
    rich_markup_mode="rich",
    help="Planning workbooks in, decisions out: site selection and lot sizing.",
    context_settings={"help_option_names": ["-h", "--help"]},
)

JOBS = ("site selection", "lot sizing")

Files = Annotated[
    list[Path],
    typer.Argument(help="Filled workbooks (.xlsx or .xlsm).", metavar="FILE...", show_default=False),
]
Into = Annotated[
    Path | None,
    typer.Option(help="Folder for the returned workbooks; beside each file when left out.", file_okay=False),
]
AsJson = Annotated[
    bool,
    typer.Option("--json", help="Print JSON and nothing else: one object a workbook, or the folder's state."),
]
Served = Annotated[Path, typer.Argument(help="The folder to serve; made on first use.", file_okay=False)]


def main() -> None:
    """Run the command line."""
    gc.set_threshold(*FEW_COLLECTIONS)
    app()


def _show_version(wanted: bool) -> None:
    if wanted:
        print(f"ledgersolve {__version__}")
        raise typer.Exit


@app.callback()
def _common(
    verbose: Annotated[bool, typer.Option("--verbose", "-v", help="Log every step on standard error.")] = False,
    _version: Annotated[
        bool, typer.Option("--version", help="Show the version.", callback=_show_version, is_eager=True)
    ] = False,
) -> None:
    logging.basicConfig(
        level=logging.DEBUG if verbose else logging.WARNING,
        format="%(asctime)s %(levelname)s %(name)s %(message)s",
        datefmt="%Y-%m-%dT%H:%M:%S%z",
        stream=sys.stderr,
    )


@app.command()
def solve(files: Files, into: Into = None, as_json: AsJson = False) -> None:
    """Solve workbooks: each comes back as a copy with its results, or with its faults marked."""
    _answer_all(files, into, as_json, solving=True)


@app.command()
def check(files: Files, into: Into = None, as_json: AsJson = False) -> None:
    """Check workbooks without solving: a faulty one comes back as a copy with its faults marked."""
    _answer_all(files, into, as_json, solving=False)


def _job(given: str) -> str:
    """The job of this name, however it is written."""
    plain = " ".join(given.replace("_", " ").replace("-", " ").split()).casefold()
    if plain in JOBS:
        return plain
    names = " or ".join(f"'{job}'" for job in JOBS)
    hint = "; put it in quotes" if any(plain in job.split() for job in JOBS) else ""
    raise typer.BadParameter(f"{given!r} is no job; expected {names}{hint}")


@app.command()
def template(
    job: Annotated[str, typer.Argument(
        help="The job the workbook is for: 'site selection' or 'lot sizing'.", metavar="JOB", parser=_job,
        autocompletion=lambda: list(JOBS),
    )],
    file: Annotated[
        Path | None, typer.Argument(help="Where to write it; JOB.xlsx when left out.", metavar="FILE")
    ] = None,
) -> None:
    """Write an empty workbook with notes and drop-down lists for one of the two jobs."""
    from ledgersolve.contract.reading import Job
    from ledgersolve.contract.templates import write_template

    target = file or Path(f"{job}.xlsx")
    target = target if target.suffix else target.with_name(f"{target.name}.xlsx")
    if target.suffix.lower() != ".xlsx":
        _wrong(f"{target}: a template is a workbook; give it a name that ends in .xlsx.")
    if target.exists():
        _wrong(f"{target} is there already; name another file or move it away.")
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        write_template(Job(job), target)
    except OSError as trouble:
        _wrong(f"{target} cannot be written ({trouble.strerror or trouble}); name another place.")
    typer.echo(f"Wrote {_bold(target)}. Fill it in, then: ledgersolve solve '{target}'")


def _wrong(*troubles: str) -> NoReturn:
    """Say what is wrong with how the command was used, and end with 2."""
    for trouble in troubles:
        typer.echo(trouble, err=True)
    raise typer.Exit(2)


@app.command()
def watch(
    folder: Served,
    once: Annotated[
        bool, typer.Option("--once", help="Empty the inbox, then end; 1 where something is left in it.")
    ] = False,
    workers: Annotated[
        int | None, typer.Option(help="Workbooks solved at a time; one more place is kept for small ones.", min=1)
    ] = None,
    cluster: Annotated[
        str | None, typer.Option(help="Address of a dask scheduler that runs the solves.", metavar="ADDRESS")
    ] = None,
    polling: Annotated[
        bool | None, typer.Option(help="Look on a timer only (network folders); chosen by itself.")
    ] = None,
    config: Annotated[
        Path | None, typer.Option(help="Service settings (TOML).", exists=True, dir_okay=False)
    ] = None,
) -> None:
    """Serve a folder: drops in Inbox/ come back in Returned/."""
    from ledgersolve.service.config import SettingsError, check_cluster, load_settings
    from ledgersolve.service.watch import serve

    try:
        settings = load_settings(config, workers=workers, polling=polling)
        if cluster is not None:
            check_cluster(cluster)
    except SettingsError as trouble:
        _wrong(str(trouble))
    raise typer.Exit(serve(folder, once=once, cluster=cluster, settings=settings))


@app.command()
def status(
    folder: Annotated[Path, typer.Argument(help="A served folder.", readable=False)],
    as_json: AsJson = False,
    health: Annotated[bool, typer.Option("--health", help="Print nothing, only end with the code.")] = False,
) -> None:
    """List what waits, runs and came back in a served folder.

    Ends with 0 while a service looks after it, 1 while none does or it can take nothing in, 2 where the
    folder was never served, 3 where this account may not know.
    """
    from ledgersolve.service import board

    state = board.status(folder)
    if as_json and not health:
        print(json.dumps(state, indent=2))
    elif not health:
        print(board.as_text(state))
    raise typer.Exit(board.exit_code(state))


@app.command()
def demo(
    folder: Annotated[
        Path | None, typer.Argument(help="Folder to make; ledgersolve_demo when left out.", file_okay=False)
    ] = None,
) -> None:
    """Drop the demo workbooks into a folder, serve it once and say where the results are."""
    from ledgersolve.service import board
    from ledgersolve.service.config import SettingsError, load_settings
    from ledgersolve.service.watch import serve
    from ledgersolve.shipped import shipped
    from ledgersolve.telling import returning

    try:
        settings = load_settings(None, log_level="WARNING")
    except SettingsError as trouble:
        _wrong(str(trouble))
    served = _unused(folder or Path("ledgersolve_demo"))
    inbox = served / "Inbox"
    inbox.mkdir(parents=True)
    drops = sorted(shipped("inbox_demo").glob("*.xlsx"))
    for drop in drops:
        shutil.copyfile(drop, inbox / drop.name)
    typer.echo(f"Dropped {len(drops)} invented workbooks into {inbox}; solving them takes a minute or less.")
    with returning(lambda: board.status(served), len(drops)):
        code = serve(served, once=True, cluster=None, settings=settings)
    returned = sorted((served / "Returned").iterdir())
    typer.echo(f"The results are in {_bold(served / 'Returned')}; open the first one first:")
    for each in returned:
        typer.echo(f"  {each.name}")
    if len(returned) < len(drops):
        typer.echo(f"Stopped with {len(returned)} of {len(drops)} back. "
                   f"To go on: ledgersolve watch '{served}' --once")
        code = code or 1
    raise typer.Exit(code)


def _bold(path: Path) -> str:
    """A path to catch the eye; where output is no terminal, the marks are left out."""
    return typer.style(str(path), bold=True)


def _unused(folder: Path) -> Path:
    """Give the folder, or the first of 'folder 2', 'folder 3', ... that does not exist yet."""
    candidate, number = folder, 2
    while candidate.exists():
        candidate, number = folder.with_name(f"{folder.name} {number}"), number + 1
    return candidate


def _answer_all(files: list[Path], into: Path | None, as_json: bool, *, solving: bool) -> None:
    troubles = [trouble for file in files if (trouble := _unfit(file))]
    if troubles:
        _wrong(*troubles)
    from ledgersolve.answer import exit_code
    from ledgersolve.job import handle
    from ledgersolve.telling import progress_line, tell

    answers = []
    try:
        for file in files:
            with progress_line(file, quiet=as_json) as progress:
                answer = handle(file, into or file.parent, solve=solving, progress=progress)
            answers.append(answer)
            if not as_json:
                tell(answer, solving=solving)
    except KeyboardInterrupt:
        typer.echo(f"Stopped at {file.name}; {len(answers)} of {len(files)} done, nothing half written.", err=True)
        raise typer.Exit(130) from None
    if as_json:
        told = [answer.as_json() for answer in answers]
        print(json.dumps(told[0] if len(told) == 1 else told, indent=2))
    raise typer.Exit(exit_code(answers))


def _unfit(file: Path) -> str:
    """Why a path cannot be answered at all; empty where it can."""
    if file.is_dir():
        return f"{file} is a folder; name the workbooks in it, or serve it: ledgersolve watch '{file}'"
    return "" if file.exists() else f"{file} is not there; check the name and the folder."
