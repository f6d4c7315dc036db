"""The C program of pda.c, compiled when asked for and called through ctypes."""

import ctypes
import shutil
import subprocess
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from scenes import Estimates, Model

from filters.track import Scans

SOURCE = Path(__file__).with_name("pda.c")
OPTIONS = ("-O3", "-shared", "-fPIC")  # portable code: no -march=native, no -ffast-math


class NoCompiler(RuntimeError):
    """There is no gcc to compile with."""


def c_pda(folder: Path, model: Model, scans: Scans) -> Callable[[], Estimates]:
    """Compile into a folder and make room; what is returned follows all trials in one call.

    raises      NoCompiler
    """
    run_pda = _compiled(folder).run_pda
    run_pda.restype = None
    trials, length = scans.origins.shape
    means, covariances = np.empty((trials, length, 4)), np.empty((trials, length, 4, 4))
    arrays = (_packed(model), model.mean, model.covariance, scans.detections, scans.offsets)
    given = [_address(array) for array in arrays]
    sizes = ctypes.c_int64(trials), ctypes.c_int64(length)
    written = _address(means), _address(covariances)

    def run() -> Estimates:
        run_pda(*given, *sizes, *written)
        return means, covariances

    return run


def _compiled(folder: Path) -> ctypes.CDLL:
    compiler = shutil.which("gcc")
    if compiler is None:
        raise NoCompiler("no gcc on the path")
    library = folder / "pda.so"
    subprocess.run([compiler, *OPTIONS, "-o", library, SOURCE, "-lm"], check=True)
    return ctypes.CDLL(str(library))


def _address(array: np.ndarray) -> Any:
    """Pointer to the numbers of a C-contiguous array, which it keeps alive."""
    if array.dtype not in (np.float64, np.int64) or not array.flags.c_contiguous:
        raise TypeError(f"the C program takes contiguous doubles and int64, got {array.dtype}")
    return array.ctypes.data_as(ctypes.c_void_p)


def _packed(model: Model) -> np.ndarray:
    """The C program's `Model`: doubles in a row."""
    matrices = (model.transition, model.process_noise, model.measurement, model.noise)
    numbers = (
        model.detection_probability,
        model.gate_probability,
        model.gate_limit,
        model.clutter,
    )
    return np.concatenate([*(matrix.ravel() for matrix in matrices), numbers])
