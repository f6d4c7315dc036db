"""What the command and Python users call: studies in, results and what became of them out."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

from harness.evidence.plans import FixedCount, keyed_conditions
from harness.evidence.results import Results
from harness.evidence.run import run_study as run_and_summarise
from harness.report.folder import claim_folder, load_results, write_results
from harness.study.reader import load_study
from harness.study.study import Study
from harness.trials.driver import Progress, SetAside
from harness.trials.store import locked_store
from harness.trials.warm_up import warm_up
from harness.trials.workers import local_workers

RESULTS = Path("results")


@dataclass(frozen=True)
class RunOutcome:
    """What a run came to."""

    results: Results
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
    study = study if isinstance(study, Study) else load_study(study)
    folder = results_folder(study, into)
    claim_folder(folder)
    store_folder = folder.parent / ".store" if store is None else Path(store)
    with locked_store(store_folder) as opened:
        for path in opened.damaged:
            tell(f"{path}: damaged; its trials are run again")
        processes = local_workers(workers)
        plan = FixedCount(keyed_conditions(study), study.seed, study.trials, processes.in_flight)
        missing = plan.next_tasks(lambda key, span: (key, span) in opened)
        if not missing:
            tell("nothing to run: every trial is in the store")
        warm_up(missing, lambda: tell("compiling for this machine, once; about half a minute"))
        results, aside = run_and_summarise(study, opened, processes, watch)
        write_results(results, folder)
    return RunOutcome(replace(results, folder=folder), aside, opened.damaged)


def results_folder(study: Study, into: str | Path | None = None) -> Path:
    """Where a study's results go."""
    return RESULTS / study.name if into is None else Path(into)


def find_results(path: str | Path) -> Results:
    """Results of a folder, or of a study file that was run from here.

    raises      ResultsError, StudyError
    """
    path = Path(path)
    if path.is_dir() or path.suffix != ".toml":
        return load_results(path)
    return load_results(results_folder(load_study(path)))
