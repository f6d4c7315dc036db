"""The command line: arguments in, exit code out, no logic."""

from __future__ import annotations

import shutil
import signal
import sys
import traceback
from collections.abc import Iterable
from pathlib import Path
from types import FrameType
from typing import TYPE_CHECKING, Annotated

import typer
from typer.exceptions import TyperException

if TYPE_CHECKING:
    from harness.trials.driver import SetAside

DONE, WRONG_INPUT, BROKEN_OFF, OUR_FAULT, INTERRUPTED, TERMINATED = 0, 2, 4, 5, 130, 143
_WHERE_TO_REPORT = "please report it with the lines above and the study file"

app = typer.Typer(
    help="Monte Carlo performance evaluation of single-target trackers in clutter.",
    add_completion=True,
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["-h", "--help"]},
)

store_app = typer.Typer(help="Look after the store of trials.", no_args_is_help=True)
app.add_typer(store_app, name="store")

StudyFile = Annotated[Path, typer.Argument(help="A study file.", metavar="STUDY")]
Anything = Annotated[
    Path, typer.Argument(help="A results folder, or a study that was run.", metavar="PATH")
]


@app.command()
def check(
    study: Annotated[
        Path | None, typer.Argument(help="A study file.", metavar="STUDY", show_default=False)
    ] = None,
    schema: Annotated[
        bool, typer.Option("--schema", help="Print the JSON Schema of study files instead.")
    ] = False,
) -> None:
    """Say what a study would run, or what is wrong with it; runs no trials."""
    from harness import api

    if schema:
        print(api.schema_text())
        return
    if study is None:
        raise typer.BadParameter("name a study file, or ask for --schema")
    print(api.check_study(study, tell=_tell))


@app.command()
def run(
    study: StudyFile,
    into: Annotated[
        Path | None, typer.Option(help="Folder of the results [default: results/NAME].")
    ] = None,
    store: Annotated[
        Path | None, typer.Option(help="Folder of the store [default: .store beside it].")
    ] = None,
    workers: Annotated[
        int | None, typer.Option(min=1, help="Processes [default: one a core].")
    ] = None,
    figures: Annotated[bool, typer.Option(help="Draw figures too.")] = True,
    part: Annotated[
        str | None,
        typer.Option(help="Run one part into the store, such as 3/10; see store join."),
    ] = None,
) -> None:
    """Run what is missing of a study; write and show its comparison."""
    from harness import api
    from harness.report.progress import ProgressLine

    if part is not None:
        _run_part(study, part, store, workers)
        return
    line = ProgressLine()
    try:
        outcome = api.run_study(
            study, into=into, store=store, workers=workers, watch=line, tell=_tell
        )
    finally:
        line.close()
    if not outcome.results.summary.empty:
        drawn = api.draw(outcome.folder) if figures else []
        print(api.closing_words(outcome, drawn, _width()))
    _tell_set_aside(outcome.set_aside)
    if outcome.set_aside:
        _tell("the results lack these trials; run the study again to try them anew")
        raise typer.Exit(BROKEN_OFF)


def _run_part(study: Path, part: str, store: Path | None, workers: int | None) -> None:
    from harness import api
    from harness.report.progress import ProgressLine

    number, slash, of = part.partition("/")
    if not (slash and number.isdecimal() and of.isdecimal()):
        raise typer.BadParameter(f"--part {part}: write it as 3/10, part 3 of 10")
    line = ProgressLine()
    try:
        outcome = api.run_part(
            study, int(number), int(of), store=store, workers=workers, watch=line, tell=_tell
        )
    finally:
        line.close()
    print(f"part {number} of {of}: {outcome.trials:,} trials run, in {outcome.store}")
    _tell_set_aside(outcome.set_aside)
    if outcome.set_aside:
        raise typer.Exit(BROKEN_OFF)


def _tell_set_aside(tasks: Iterable[SetAside]) -> None:
    for one in tasks:
        _tell(f"set aside after three tries: {one.task.label}: {one.failure.error}")


@app.command()
def show(
    path: Anything,
    metric: Annotated[
        list[str] | None,
        typer.Option(
            help="A column of summary.csv, such as track_loss_rate, rmse_position, anees or gospa; "
            "may be repeated."
        ),
    ] = None,
    rows: Annotated[
        list[str] | None, typer.Option(help="A swept key, or strategy; may be repeated.")
    ] = None,
    columns: Annotated[
        list[str] | None, typer.Option(help="A swept key, or strategy; may be repeated.")
    ] = None,
    form: Annotated[
        str, typer.Option("--as", help="terminal, csv, markdown or latex.")
    ] = "terminal",
) -> None:
    """Show tables of a run."""
    from harness import api

    print(api.tables(path, metric or [], rows or [], columns or [], form, _width()))


@app.command()
def draw(
    path: Anything,
    form: Annotated[
        list[str] | None, typer.Option("--as", help="svg, pdf or png; may be repeated.")
    ] = None,
    metric: Annotated[
        str | None, typer.Option(help="Draw this metric only, against the key named.")
    ] = None,
    against: Annotated[str | None, typer.Option(help="A swept key.")] = None,
    into: Annotated[
        Path | None, typer.Option(help="Folder of the figures [default: figures in the results].")
    ] = None,
) -> None:
    """Draw figures of a run."""
    from harness import api

    for written in api.draw(path, form or ["svg"], metric, against, into):
        print(written)


@store_app.command("reclaim")
def reclaim(
    studies: Annotated[
        list[Path] | None,
        typer.Argument(
            help="Studies whose trials are kept, finished or not.", metavar="[STUDY]..."
        ),
    ] = None,
    store: Annotated[
        Path | None, typer.Option(help="Folder of the store [default: results/.store].")
    ] = None,
    remove: Annotated[bool, typer.Option("--remove", help="Remove what is not needed.")] = False,
) -> None:
    """Show what no results folder beside the store and no study named needs; remove it if asked."""
    from harness import api

    print(api.reclaim_store(studies or [], store, remove=remove))


@store_app.command("join")
def join(
    others: Annotated[
        list[Path],
        typer.Argument(help="Stores, or folders with a .store in them.", metavar="FOLDER..."),
    ],
    store: Annotated[
        Path | None, typer.Option(help="Store to bring them to [default: results/.store].")
    ] = None,
) -> None:
    """Bring together what parts of a study stored apart; run the study then."""
    from harness import api

    joined = api.join_stores(others, store)
    for path in joined.damaged:
        _tell(f"{path}: damaged and left out; run its part again")
    print(f"{joined.added:,} segments added, {joined.there_already:,} were there already")


def main() -> int:
    """Run the command; every end has its exit code."""
    signal.signal(signal.SIGTERM, _end_on_sigterm)
    code = _run_command()
    if code in (INTERRUPTED, TERMINATED):
        _tell("stopped; what was finished is kept, and the same command goes on from there")
    return code


def _run_command() -> int:
    try:
        result = app(standalone_mode=False)
    except TyperException as error:
        error.show()  # type: ignore[attr-defined]
        return WRONG_INPUT
    except (KeyboardInterrupt, typer.Abort):
        return INTERRUPTED
    except SystemExit as end:
        return end.code if isinstance(end.code, int) else OUR_FAULT
    except Exception as error:
        return _code_of(error)
    return result if isinstance(result, int) else DONE


def _code_of(error: Exception) -> int:
    from harness.api import ChoiceError
    from harness.report.folder import ResultsError
    from harness.study.mistakes import StudyError
    from harness.trials.store import StoreError

    if isinstance(error, (StudyError, ResultsError, StoreError, ChoiceError)):
        print(error, file=sys.stderr)
        return WRONG_INPUT
    if isinstance(error, OSError):
        _tell(f"broken off: {error}; what was stored is kept, and the same command goes on")
        return BROKEN_OFF
    traceback.print_exc()
    _tell(f"this is a fault of the tool itself; {_WHERE_TO_REPORT}")
    return OUR_FAULT


def _width() -> int:
    """Columns of the terminal, 100 at most; 80 where there is none."""
    return min(100, shutil.get_terminal_size().columns) if sys.stdout.isatty() else 80


def _end_on_sigterm(signum: int, frame: FrameType | None) -> None:
    raise SystemExit(TERMINATED)


def _tell(words: str) -> None:
    print(f"trackassay: {words}", file=sys.stderr)
