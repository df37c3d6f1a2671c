"""The commands; see ``ledgersolve --help``."""

import json
import logging
import shutil
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Annotated

import typer
from rich.console import Console
from rich.markup import escape
from rich.table import Table

from ledgersolve import __version__
from ledgersolve.answer import Answer, Outcome, exit_code
from ledgersolve.contract.reading import Job
from ledgersolve.mip import Progress
from ledgersolve.shipped import shipped

app = typer.Typer(
    name="ledgersolve",
    no_args_is_help=True,
    rich_markup_mode="rich",
    help="Planning workbooks in, decisions out: site selection and lot sizing.",
    context_settings={"help_option_names": ["-h", "--help"]},
)
console = Console()
errors = Console(stderr=True)

Files = Annotated[
    list[Path],
    typer.Argument(help="Filled workbooks (.xlsx or .xlsm).", exists=True, dir_okay=False, metavar="FILE..."),
]
Into = Annotated[
    Path | None,
    typer.Option(help="Folder for the returned workbooks; beside each file when left out.", file_okay=False),
]
AsJson = Annotated[bool, typer.Option("--json", help="Print one JSON object a workbook, and nothing else.")]
Served = Annotated[Path, typer.Argument(help="The folder to serve; made on first use.", file_okay=False)]


def main() -> None:
    """Run the command line."""
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


@app.command()
def template(
    job: Annotated[Job, typer.Argument(help="The job the workbook is for.", metavar="JOB")],
    file: Annotated[Path | None, typer.Argument(help="Where to write it; JOB.xlsx when left out.")] = None,
) -> None:
    """Write an empty workbook with notes and drop-down lists; JOB is 'site selection' or 'lot sizing'."""
    from ledgersolve.contract.templates import write_template

    target = file or Path(f"{job.value}.xlsx")
    if target.exists():
        errors.print(f"{escape(str(target))} is there already; name another file or move it away.")
        raise typer.Exit(2)
    write_template(job, target)
    shown = escape(str(target))
    console.print(f"Wrote [bold]{shown}[/bold]. Fill it in, then: ledgersolve solve '{shown}'", soft_wrap=True)


@app.command()
def watch(
    folder: Served,
    once: Annotated[bool, typer.Option(help="Empty the inbox, then end.")] = False,
    workers: Annotated[int | None, typer.Option(help="Workbooks solved at a time.", min=1)] = None,
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
    from ledgersolve.service.config import SettingsError, load_settings
    from ledgersolve.service.watch import serve

    try:
        settings = load_settings(config, workers=workers, polling=polling)
    except SettingsError as trouble:
        errors.print(escape(str(trouble)))
        raise typer.Exit(2) from trouble
    raise typer.Exit(serve(folder, once=once, cluster=cluster, settings=settings))


@app.command()
def status(
    folder: Annotated[Path, typer.Argument(help="A served folder.", exists=True, file_okay=False)],
    as_json: AsJson = False,
    health: Annotated[
        bool, typer.Option("--health", help="Only tell, by exit code, whether the service is well.")
    ] = False,
) -> None:
    """List what waits, runs and is done in a served folder."""
    from ledgersolve.service import board

    if health:
        raise typer.Exit(board.health(folder))
    state = board.status(folder)
    if as_json:
        print(json.dumps(state, indent=2))
    else:
        print(board.as_text(state))


@app.command()
def demo(
    folder: Annotated[
        Path | None, typer.Argument(help="Folder to make; ledgersolve_demo when left out.", file_okay=False)
    ] = None,
) -> None:
    """Drop the demo workbooks into a folder, serve it once and say where the results are."""
    from ledgersolve.service.config import load_settings
    from ledgersolve.service.watch import serve

    served = _unused(folder or Path("ledgersolve_demo"))
    inbox = served / "Inbox"
    inbox.mkdir(parents=True)
    drops = sorted(shipped("inbox_demo").glob("*.xlsx"))
    for drop in drops:
        shutil.copyfile(drop, inbox / drop.name)
    console.print(f"Dropped {len(drops)} invented workbooks into {escape(str(inbox))}; solving them now.")
    code = serve(served, once=True, cluster=None, settings=load_settings(None))
    console.print(f"\nThe results are in [bold]{escape(str(served / 'Returned'))}[/bold]:")
    for returned in sorted((served / "Returned").iterdir()):
        console.print(f"  {escape(returned.name)}", highlight=False, soft_wrap=True)
    raise typer.Exit(code)


def _unused(folder: Path) -> Path:
    """Give the folder, or the first of 'folder 2', 'folder 3', ... that does not exist yet."""
    candidate, number = folder, 2
    while candidate.exists():
        candidate, number = folder.with_name(f"{folder.name} {number}"), number + 1
    return candidate


def _answer_all(files: list[Path], into: Path | None, as_json: bool, *, solving: bool) -> None:
    from ledgersolve.job import handle

    answers = []
    for file in files:
        with _progress_line(file, quiet=as_json) as progress:
            answer = handle(file, into or file.parent, solve=solving, progress=progress)
        answers.append(answer)
        if not as_json:
            _tell(answer, solving)
    if as_json:
        told = [answer.as_json() for answer in answers]
        print(json.dumps(told[0] if len(told) == 1 else told, indent=2))
    raise typer.Exit(exit_code(answers))


@contextmanager
def _progress_line(file: Path, *, quiet: bool) -> Iterator[Callable[[Progress], None] | None]:
    """Show the running solve on one line of a terminal; nothing elsewhere."""
    if quiet or not errors.is_terminal:
        yield None
        return
    with errors.status(f"{escape(file.name)}: reading") as line:

        def show(progress: Progress) -> None:
            line.update(f"{escape(file.name)}: {escape(progress_words(progress))}")

        yield show


def progress_words(progress: Progress) -> str:
    """One line on where a solve stands."""
    words = f"{progress.stage}, {progress.seconds:.0f} s"
    if progress.best is not None:
        words += f", best {progress.best:,.0f}"
        if progress.bound is not None and progress.best:
            above = 100 * max(0.0, progress.best - progress.bound) / abs(progress.best)
            words += f", at most {above:.2f} % dearer than the best"
    return words


def _tell(answer: Answer, solving: bool) -> None:
    name = escape(Path(answer.file).name)
    if answer.outcome is Outcome.FAILED:
        console.print(f"[bold]{name}[/bold]: failed. {escape(answer.reason)}")
    elif answer.outcome is Outcome.TO_FIX:
        verdict = f", {answer.verdict.value}" if answer.verdict else ""
        console.print(f"[bold]{name}[/bold]: to fix{verdict}")
    elif not solving:
        console.print(f"[bold]{name}[/bold]: fit to be solved")
    else:
        console.print(f"[bold]{name}[/bold]: {_solved_words(answer)}")
    if answer.problems:
        console.print(_problem_table(answer))
    if answer.returned is not None:
        console.print(f"  returned: {escape(str(answer.returned))}", soft_wrap=True, highlight=False)


def _solved_words(answer: Answer) -> str:
    verdict = answer.verdict.value if answer.verdict else "solved"
    cost = "" if answer.total_cost is None else f", total cost {answer.total_cost:,.2f}"
    bound = "" if answer.lower_bound is None else f", no plan costs less than {answer.lower_bound:,.2f}"
    return verdict + cost + bound


def _problem_table(answer: Answer) -> Table:
    table = Table("", "where", "found", "expected", "what to do", box=None, pad_edge=False)
    for problem in answer.problems:
        told = problem.as_json()
        where = f"{told['sheet']} {told['cell']} {told['title']}".strip()
        table.add_row(*(escape(text) for text in (
            told["severity"], where, told["found"], told["expected"], told["remedy"])))
    return table
