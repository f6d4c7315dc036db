"""What the command and Python users call: studies in, results and what became of them out."""

from __future__ import annotations

import json
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from harness.evidence.outlook import Outlook, look_ahead, outlook_text
from harness.evidence.plans import WHOLE, FixedCount, Part, keyed_conditions
from harness.evidence.results import Results
from harness.evidence.run import run_plan
from harness.report.figures import all_figures, figures_against, save_figure
from harness.report.figures.default_set import main_key
from harness.report.folder import (
    ResultsError,
    claim_folder,
    keys_of_results,
    load_results,
    write_results,
)
from harness.report.reclaimed import reclaim_text
from harness.report.tables.comparison import DEFAULT_METRICS, comparison_table
from harness.report.tables.csv_text import as_csv
from harness.report.tables.latex import as_latex
from harness.report.tables.markdown import as_markdown
from harness.report.tables.overall import overall_table
from harness.report.tables.table import Table
from harness.report.tables.text import as_text
from harness.study.json_schema import study_json_schema
from harness.study.memory import check_memory
from harness.study.own_sensors import find_own_files, own_sensors, try_own_sensors
from harness.study.study import Study, load_study
from harness.trials.driver import Progress, SetAside, drive
from harness.trials.join import Joined, join
from harness.trials.reclaim import look_over, reclaim
from harness.trials.store import Store, StoreError, locked_store
from harness.trials.task import Task
from harness.trials.warm_up import telling_if_slow, warm_up
from harness.trials.workers import Workers, local_workers

RESULTS = Path("results")


class ChoiceError(Exception):
    """A metric, key or form that does not exist; the message names those that do."""


_FORMS: dict[str, Callable[[Table, int], str]] = {
    "terminal": as_text,
    "csv": lambda table, width: as_csv(table),
    "markdown": lambda table, width: as_markdown(table),
    "latex": lambda table, width: as_latex(table),
}


@dataclass(frozen=True)
class RunOutcome:
    """What a run came to."""

    results: Results
    folder: Path  # where the results were written
    set_aside: list[SetAside]  # tasks that failed three times, missing from the results
    damaged: list[Path]  # segments of the store that could not be read and were done again


def run_study(
    study: Study | str | Path,
    *,
    into: str | Path | None = None,
    store: str | Path | None = None,
    workers: int | None = None,
    watch: Callable[[Progress], None] = lambda progress: None,
    tell: Callable[[str], None] = lambda words: None,
) -> RunOutcome:
    """Run what is missing of a study, and write its results.

    study       a study, or the path of a study file
    into        folder of the results; default results/NAME, NAME being the study file's
    store       folder of the store; default .store beside the results
    workers     processes; default one a core
    watch       called with the progress; tell: called with words for people
    raises      StudyError, ResultsError, StoreError: the input is wrong, nothing was run
    raises      OSError: the disk is full or can't be written; what was stored stays
    """
    study = _runnable(study)
    folder = results_folder(study, into)
    claim_folder(folder, study.name)
    store_folder = folder.parent / ".store" if store is None else Path(store)
    with locked_store(store_folder) as opened:
        processes = local_workers(workers)
        plan, missing = _planned(study, WHOLE, opened, processes, tell)
        if not missing:
            tell("nothing to run: every trial is in the store")
        warm_up(missing, _telling(tell))
        results, aside = run_plan(study, plan, opened, processes, watch)
        write_results(results, folder)
    return RunOutcome(replace(results, folder=folder), folder, aside, opened.damaged)


@dataclass(frozen=True)
class PartOutcome:
    """What came of running a part of a study."""

    store: Path
    trials: int  # of the part that were missing
    set_aside: list[SetAside]


def run_part(
    study: Study | str | Path,
    number: int,
    of: int,
    *,
    store: str | Path | None = None,
    workers: int | None = None,
    watch: Callable[[Progress], None] = lambda progress: None,
    tell: Callable[[str], None] = lambda words: None,
) -> PartOutcome:
    """Run one of several parts of a study into a store; no results are made of it.

    Parts are the same on every machine, as equal as spans of 100 trials allow, and together they
    are the study. Their stores are brought together by `join_stores`; run the study then.

    number, of      part number (from 1) of so many
    raises          as run_study; ChoiceError: there is no such part
    """
    if not 1 <= number <= of:
        raise ChoiceError(f"there is no part {number} of {of}; parts go from 1 to their number")
    study = _runnable(study)
    folder = RESULTS / ".store" if store is None else Path(store)
    with locked_store(folder) as opened:
        processes = local_workers(workers)
        plan, missing = _planned(study, Part(number, of), opened, processes, tell)
        warm_up(missing, _telling(tell))
        aside = drive(plan, opened, processes, watch)
    return PartOutcome(folder, sum(task.trials for task in missing), aside)


def _runnable(study: Study | str | Path) -> Study:
    """A study that this machine can run."""
    study = study if isinstance(study, Study) else load_study(study)
    check_memory(study)
    try_own_sensors(study)
    return study


def _planned(
    study: Study, part: Part, store: Store, workers: Workers, tell: Callable[[str], None]
) -> tuple[FixedCount, list[Task]]:
    """The plan of a part of a study, and its tasks that the store has no results of."""
    for path in store.damaged:
        tell(f"{path}: damaged; its trials are run again")
    conditions = keyed_conditions(study)
    plan = FixedCount(conditions, study.seed, study.trials, workers.in_flight, part)
    return plan, plan.next_tasks(lambda key, span: (key, span) in store)


def join_stores(others: Sequence[str | Path], store: str | Path | None = None) -> Joined:
    """Copy what other stores hold into one.

    others      stores, or folders with a `.store` in them
    store       default results/.store
    raises      StoreError: one of them is none, or can't be used; OSError: the disk is full
    """
    with locked_store(RESULTS / ".store" if store is None else Path(store)) as opened:
        return join(opened, [Path(other) for other in others])


def check_study(path: str | Path, tell: Callable[[str], None] = lambda words: None) -> str:
    """What a study would run, in words, from a few scenes and no trials.

    Nothing that the study names is imported, so from a sensor of the user's own nothing is drawn.

    raises      StudyError: the study is wrong
    """
    study = load_study(path)
    find_own_files(study)
    check_memory(study)
    if own_sensors(study):
        return outlook_text(Outlook(study, (), ()))
    with telling_if_slow(_telling(tell)):
        return outlook_text(look_ahead(study))


def reclaim_store(
    studies: Sequence[str | Path], store: str | Path | None = None, *, remove: bool = False
) -> str:
    """Say what a store holds that nobody needs, and remove it if asked to.

    Needed is what the results in the folders beside the store were made from, and what the studies
    named would take from it as they are now.

    store       default results/.store
    raises      StudyError, StoreError, ResultsError; OSError: the store can't be written
    """
    folder = RESULTS / ".store" if store is None else Path(store)
    if not folder.is_dir():
        raise StoreError(f"{folder}: there is no store; name it with --store")
    needed = {
        case.key
        for study in studies
        for condition in keyed_conditions(load_study(study))
        for case in condition.cases
    }
    for beside in folder.parent.iterdir():
        needed |= keys_of_results(beside)
    with locked_store(folder) as opened:
        found = look_over(opened, needed)
        if remove:
            reclaim(opened, needed)
    return reclaim_text(found, folder, remove)


def schema_text() -> str:
    """JSON Schema of study files, for editors."""
    return json.dumps(study_json_schema(), indent=2)


def closing_words(outcome: RunOutcome, drawn: Sequence[Path], width: int = 100) -> str:
    """What a run ends with: the comparison table, and the paths of what was written.

    drawn   figures of this run
    """
    tables = (path for path in outcome.folder.iterdir() if path.is_file())
    written = sorted([*tables, *drawn])
    paths = "\n".join(f"  {path}" for path in written)
    return f"{as_text(overall_table(outcome.results), width)}\n\nwritten:\n{paths}"


def tables(
    path: str | Path,
    metrics: Sequence[str] = (),
    rows: Sequence[str] = (),
    columns: Sequence[str] = (),
    form: str = "terminal",
    width: int = 100,
) -> str:
    """Comparison tables of a run as text, one a metric.

    raises      ResultsError, StudyError: no results there; ChoiceError: no such metric, key or form
    """
    results, study = _results_and_study(Path(path))
    if form not in _FORMS:
        raise ChoiceError(f"no form of table is called {form!r}; choose one of {', '.join(_FORMS)}")
    try:
        chosen = [
            comparison_table(results, metric, rows, columns)
            for metric in metrics or DEFAULT_METRICS
        ]
    except ValueError as error:
        raise ChoiceError(str(error)) from error
    text = "\n\n".join(_FORMS[form](table, width) for table in chosen)
    if form == "terminal" and study is not None and dict(study.document) != results.document:
        text += "\n\nThe study file has changed since: these are the results of before."
    return text


def draw(
    path: str | Path,
    forms: Sequence[str] = ("svg",),
    metric: str | None = None,
    against: str | None = None,
    into: str | Path | None = None,
) -> list[Path]:
    """Draw figures of a run; return the paths written.

    metric, against     one metric against a swept key; without both, the usual set
    into                default: the folder `figures` in the results
    raises      ResultsError, StudyError: no results there; ChoiceError: no such metric, key or form
    """
    results = find_results(path)
    folder = _folder_of(results) / "figures" if into is None else Path(into)
    try:
        if metric is None and against is None:
            figures = all_figures(results)
        else:
            key = against or main_key(results)
            if key is None:
                raise ValueError("nothing is swept in this study; leave out --metric")
            figures = figures_against(results, metric or DEFAULT_METRICS[0], key)
        _make_folder(folder)
        return [
            path
            for stem, figure in figures.items()
            for path in save_figure(figure, folder / stem, forms)
        ]
    except ValueError as error:
        raise ChoiceError(str(error)) from error


def results_folder(study: Study, into: str | Path | None = None) -> Path:
    """Where a study's results go."""
    return RESULTS / study.name if into is None else Path(into)


def find_results(path: str | Path) -> Results:
    """Results of a folder, or of a study file that was run from here.

    raises      ResultsError, StudyError
    """
    return _results_and_study(Path(path))[0]


def _results_and_study(path: Path) -> tuple[Results, Study | None]:
    """Results of a path, and the study as it is now where the path is that of its file."""
    if path.is_dir() or path.suffix != ".toml":
        return load_results(path), None
    study = load_study(path)
    return load_results(results_folder(study)), study


def _make_folder(folder: Path) -> None:
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise ChoiceError(f"{folder}: can't be a folder of figures ({error.strerror})") from error


def _folder_of(results: Results) -> Path:
    if results.folder is None:
        raise ResultsError("these results were never written to a folder")
    return results.folder


def _telling(tell: Callable[[str], None]) -> Callable[[], None]:
    return lambda: tell("getting kernels ready; compiling them, once, takes about a minute")
