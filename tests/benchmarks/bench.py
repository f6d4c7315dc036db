"""How fast: `python tests/benchmarks/bench.py [--out bench.json]`, a minute or two.

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

from c_pda import NoCompiler, c_pda
from harness_rows import two_workers_row, whole_trial_row
from numpy_pda import numpy_pda
from reference_pda import reference_pda
from scenes import (
    CLUTTER_PER_SCAN,
    RANGE_BEARING_SCENE,
    SCANS,
    Drawn,
    Estimates,
    drawn,
    first_trials,
    linear_model,
)
from timing import Record, Timing, interleaved, table

from filters.hypothesis_filter import compiled_filter, room_for
from filters.strategies import (
    GaussianMixture,
    KnownAssociation,
    MostProbableHypothesis,
    NearestNeighbour,
    NScanMixture,
    ParticleFilter,
    ProbabilisticDataAssociation,
    PrunedMixture,
    RunnallsMixture,
)
from filters.strategies.strategy import Strategy
from filters.track import Tracks, room_for_tracks

TRIALS = 200
PDA = ProbabilisticDataAssociation(kind="pda")
STRATEGIES = (
    NearestNeighbour(kind="nearest-neighbour"),
    MostProbableHypothesis(kind="most-probable-hypothesis"),
    PDA,
    GaussianMixture(kind="gaussian-mixture"),
    KnownAssociation(kind="known-association"),
)
# Each with the least ratio wanted of a scan in C to one of its hypotheses.
MIXTURES = (
    (GaussianMixture(kind="gaussian-mixture"), 0.16 / 0.4),
    (PrunedMixture(kind="pruned-mixture"), 0.16 / 0.25),
    (NScanMixture(kind="n-scan-mixture"), None),
    (RunnallsMixture(kind="runnalls-mixture"), None),
)
# PDA on range and bearing, each with the least ratio wanted of a scan of the linear one to its own.
LINEARISATIONS = (
    ({"kind": "first-order"}, 1 / 2),
    ({"kind": "unscented"}, 1 / 4),
    ({"kind": "cubature"}, 1 / 4),
    ({"kind": "iterated"}, None),
    ({"kind": "converted-measurements"}, None),
)
PARTICLE_FILTER = ParticleFilter(kind="particle-filter")


def run(strategy: Strategy, batch: Drawn) -> Tracks:
    """Run a strategy on every trial, room for its tracks and all."""
    scans = batch.told if strategy.is_told_origins else batch.scans
    return strategy.run(batch.assumptions, scans, batch.numbers, 0)


def pda_rows(batch: Drawn) -> list[Record]:
    """Rows of our PDA against the reference library, a NumPy program and a C program.

    raises      AssertionError: estimates differ
    """
    model = linear_model()
    few, some = first_trials(batch, 1), first_trials(batch, 10)
    scans = batch.scan_count

    def ours() -> Tracks:
        return run(PDA, batch)

    reference = reference_pda(model, few.scans)
    must_agree(run(PDA, few), reference(), 1e-6)
    times = interleaved(ours, reference, repeats=5)
    counts = scans, few.scan_count
    rows = [compared("PDA, a scan", "reference library", times, counts, 1000.0)]

    def in_numpy() -> Estimates:
        return numpy_pda(model, some.scans)

    must_agree(run(PDA, some), in_numpy(), 1e-9)
    times = interleaved(ours, in_numpy, repeats=30)
    counts = scans, some.scan_count
    rows.append(compared("PDA, a scan", "NumPy program", times, counts, 40.0))

    with tempfile.TemporaryDirectory() as folder:
        try:
            in_c = c_pda(Path(folder), model, batch.scans)
        except NoCompiler as reason:
            print(f"No row of the PDA kernel against one in C: {reason}.")
            return rows
        kernel = pda_kernel(batch)
        must_agree(kernel(), in_c(), 1e-9)
        times = interleaved(kernel, in_c, repeats=200)
    rows.append(compared("PDA kernel, a scan", "C kernel, gcc -O3", times, (scans, scans), 1 / 3))
    return rows


def pda_kernel(batch: Drawn) -> Callable[[], Tracks]:
    """Our PDA alone, its room and tracks made beforehand, as those of the C kernel are."""
    models, prior, _ = batch.assumptions
    n, m = len(prior.mean), batch.scans.detections.shape[1]
    reduction = PDA.reduction()
    strategy = PDA.kernel_arguments(batch.assumptions, m, reduction)
    tracks = room_for_tracks(batch.scans, n)
    room = room_for(n, m, strategy.rules, strategy.modes, reduction, batch.scans.most_detections)
    kernel = compiled_filter(n, m)

    def run_kernel() -> Tracks:
        kernel(models, strategy, prior, batch.scans, tracks, room)
        return tracks

    return run_kernel


def must_agree(ours: Tracks, theirs: Estimates, tolerance: float) -> None:
    """Fail unless two trackers say the same of every scan."""
    for found, expected in zip((ours.means, ours.covariances), theirs, strict=True):
        np.testing.assert_allclose(found, expected, rtol=tolerance, atol=tolerance)


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


def mixture_rows(batch: Drawn) -> list[Record]:
    """Rows of the mixtures, a hypothesis of theirs against a scan of the PDA in C."""
    things = [lambda strategy=strategy: run(strategy, batch) for strategy, _ in MIXTURES]
    with tempfile.TemporaryDirectory() as folder:
        try:
            in_c = c_pda(Path(folder), linear_model(), batch.scans)
        except NoCompiler as reason:
            print(f"No rows of mixtures against a kernel in C: {reason}.")
            return []
        *timings, scan_in_c = interleaved(*things, in_c, repeats=50)
    rows = []
    for (strategy, wanted), timing in zip(MIXTURES, timings, strict=True):
        name = f"{strategy.kind} of {strategy.max_components}, a hypothesis"
        counts = int(run(strategy, batch).hypotheses.sum()), batch.scan_count
        rows.append(compared(name, "a scan in C", [timing, scan_in_c], counts, wanted))
    return rows


def linearisation_rows(batch: Drawn) -> list[Record]:
    """Rows of PDA on range and bearing, and of PD by quadrature, against PDA on a linear sensor."""
    polar = drawn(TRIALS, RANGE_BEARING_SCENE)
    strategies = [
        ProbabilisticDataAssociation(kind="pda", linearisation=how) for how, _ in LINEARISATIONS
    ]
    by_quadrature = ProbabilisticDataAssociation(kind="pda", detection_points_per_axis=3)
    linear, *timings, quadrature = interleaved(
        lambda: run(PDA, batch),
        *(lambda strategy=strategy: run(strategy, polar) for strategy in strategies),
        lambda: run(by_quadrature, batch),
        repeats=20,
    )
    against, counts = "PDA, linear sensor", (polar.scan_count, batch.scan_count)
    rows = [
        compared(f"PDA, {how['kind']}, a scan", against, [timing, linear], counts, wanted)
        for (how, wanted), timing in zip(LINEARISATIONS, timings, strict=True)
    ]
    name = "PDA, PD by 3^4 points, a scan"
    return [*rows, compared(name, against, [quadrature, linear], (batch.scan_count,) * 2, None)]


def particle_rows(batch: Drawn) -> list[Record]:
    """Rows of the particle filter, per scan and per particle moved and weighed."""
    few = first_trials(batch, 3)
    (timing,) = interleaved(lambda: run(PARTICLE_FILTER, few), repeats=50)
    particles = PARTICLE_FILTER.particles
    return [
        plain_row(f"particle-filter of {particles:,}, a scan", timing, few.scan_count),
        plain_row("particle-filter, a particle-update", timing, few.scan_count * particles),
    ]


def harness_rows(batch: Drawn) -> list[Record]:
    """Rows of whole trials: what surrounds the kernels, and a second worker."""
    rows = [whole_trial_row(STRATEGIES)]
    if (os.cpu_count() or 1) < 2:
        print("No row of two workers: there is one core.")
        return rows
    return [*rows, two_workers_row(STRATEGIES)]


GROUPS = (
    pda_rows,
    strategy_rows,
    mixture_rows,
    linearisation_rows,
    particle_rows,
    harness_rows,
)


def plain_row(name: str, timing: Timing, count: int) -> Record:
    """Return a row that compares with nothing."""
    return Record(name, each(timing, count), spread=timing.worst / timing.best)


def compared(
    name: str, against: str, times: list[Timing], counts: tuple[int, int], wanted: float | None
) -> Record:
    """Return the row of ours and another, each timed on its own number of scans."""
    ours, theirs = times
    own = each(ours, counts[0])
    spread = max(ours.worst / ours.best, theirs.worst / theirs.best)
    return Record(name, own, against, each(theirs, counts[1]) / own, wanted, spread)


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
        f"the target's own.\n{TRIALS} trials of {SCANS} scans; the best of interleaved repeats; "
        "spread is worst over best.\n",
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
