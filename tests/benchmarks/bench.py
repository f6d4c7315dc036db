"""How fast: `python tests/benchmarks/bench.py [--out bench.json]`, about a minute on one core.

A group of rows is a function from the drawn scenes to records; GROUPS lists them. Times are the
best of interleaved repeats. Trackers that are compared must first give the same estimates.
"""

import argparse
import json
import os
import platform
import sys
import tempfile
from collections.abc import Callable
from pathlib import Path

import numba
import numpy as np
from threadpoolctl import threadpool_limits

sys.path.insert(0, str(Path(__file__).parents[2]))

from c_pda import NoCompiler, compiled_c_pda
from numpy_pda import numpy_pda
from reference_pda import reference_pda
from scenes import CLUTTER_PER_SCAN, SCANS, Drawn, drawn, first_trials, linear_model
from timing import Record, Timing, interleaved, table

from filters.strategies import (
    GaussianMixture,
    KnownAssociation,
    MostProbableHypothesis,
    NearestNeighbour,
    ParticleFilter,
    ProbabilisticDataAssociation,
)
from filters.strategies.strategy import Strategy
from filters.track import Tracks

TRIALS = 200
PDA = ProbabilisticDataAssociation(kind="pda")
STRATEGIES = (
    NearestNeighbour(kind="nearest-neighbour"),
    MostProbableHypothesis(kind="most-probable-hypothesis"),
    PDA,
    GaussianMixture(kind="gaussian-mixture"),
    KnownAssociation(kind="known-association"),
)
PARTICLE_FILTER = ParticleFilter(kind="particle-filter")


def run(strategy: Strategy, batch: Drawn) -> Tracks:
    """Run a strategy on every trial, room for its tracks and all."""
    scans = batch.told if strategy.is_told_origins else batch.scans
    return strategy.run(batch.assumptions, scans, batch.numbers, 0)


def pda_rows(batch: Drawn) -> list[Record]:
    """Rows of our PDA against the reference library, a NumPy program and a C program."""
    model = linear_model()
    few, some = first_trials(batch, 1), first_trials(batch, 10)
    rows = [
        pda_row(batch, "reference library", few, reference_pda(model, few.scans), 1e-6, 5, 1000.0),
        pda_row(batch, "NumPy program", some, lambda: numpy_pda(model, some.scans), 1e-9, 30, 40.0),
    ]
    with tempfile.TemporaryDirectory() as folder:
        try:
            c_pda = compiled_c_pda(Path(folder))
        except NoCompiler as reason:
            print(f"No row of PDA against a C program: {reason}.")
            return rows
        other = "C program, gcc -O3"
        rows.append(
            pda_row(batch, other, batch, lambda: c_pda(model, batch.scans), 1e-9, 200, 1 / 3)
        )
    return rows


def pda_row(
    batch: Drawn,
    name: str,
    part: Drawn,
    other: Callable[[], tuple[np.ndarray, np.ndarray]],
    tolerance: float,
    repeats: int,
    wanted: float,
) -> Record:
    """Check that another PDA, which runs a part of the batch, says what ours says; then time both.

    raises      AssertionError: estimates differ
    """
    tracks = run(PDA, part)
    means, covariances = other()
    np.testing.assert_allclose(tracks.means, means, rtol=tolerance, atol=tolerance)
    np.testing.assert_allclose(tracks.covariances, covariances, rtol=tolerance, atol=tolerance)
    ours, theirs = interleaved(lambda: run(PDA, batch), other, repeats=repeats)
    ratio = (theirs.best / part.scan_count) / (ours.best / batch.scan_count)
    spread = max(ours.worst / ours.best, theirs.worst / theirs.best)
    return Record("PDA, a scan", each(ours, batch.scan_count), name, ratio, wanted, spread)


def strategy_rows(batch: Drawn) -> list[Record]:
    """Rows of every Gaussian strategy, per scan and per hypothesis formed."""
    timings = interleaved(
        *(lambda strategy=strategy: run(strategy, batch) for strategy in STRATEGIES), repeats=50
    )
    rows = []
    for strategy, timing in zip(STRATEGIES, timings, strict=True):
        hypotheses = int(run(strategy, batch).hypotheses.sum())
        for unit, count in (("a scan", batch.scan_count), ("a hypothesis", hypotheses)):
            rows.append(plain_row(f"{strategy.kind}, {unit}", timing, count))
    return rows


def particle_rows(batch: Drawn) -> list[Record]:
    """Rows of the particle filter, per scan and per particle moved and weighed."""
    few = first_trials(batch, 3)
    (timing,) = interleaved(lambda: run(PARTICLE_FILTER, few), repeats=50)
    particles = PARTICLE_FILTER.particles
    return [
        plain_row(f"particle-filter of {particles:,}, a scan", timing, few.scan_count),
        plain_row("particle-filter, a particle-update", timing, few.scan_count * particles),
    ]


GROUPS = (pda_rows, strategy_rows, particle_rows)


def plain_row(name: str, timing: Timing, count: int) -> Record:
    """Return a row that compares with nothing."""
    return Record(name, each(timing, count), spread=timing.worst / timing.best)


def each(timing: Timing, count: int) -> float:
    """Microseconds of one of `count`."""
    return timing.best / count * 1e6


def machine() -> str:
    """Processor, system and the versions that make the machine code."""
    processor = platform.processor() or platform.machine()
    information = Path("/proc/cpuinfo")
    if information.exists():
        names = [line for line in information.read_text().splitlines() if "model name" in line]
        processor = names[0].split(":", 1)[1].strip() if names else processor
    return (
        f"{processor}, {os.cpu_count()} cores, {platform.system()} {platform.machine()}, "
        f"Python {platform.python_version()}, numpy {np.__version__}, numba {numba.__version__}"
    )


def main() -> None:
    """Measure all groups; print the table and write the records."""
    arguments = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    arguments.add_argument("--out", type=Path, default=Path("bench.json"), help="file of records")
    out = arguments.parse_args().out

    here = machine()
    print(
        f"{here}\n"
        f"One core, 4 states, 2 measured numbers, {CLUTTER_PER_SCAN:g} false detections a scan and "
        f"the target's own.\n{TRIALS} trials of {SCANS} scans; the best of interleaved repeats.\n",
        flush=True,
    )
    with threadpool_limits(1):
        batch = drawn(TRIALS)
        records = [record for group in GROUPS for record in group(batch)]
    print(table(records))
    rows = [{**record._asdict(), "machine": here} for record in records]
    out.write_text(json.dumps(rows, indent=1) + "\n")


if __name__ == "__main__":
    main()
