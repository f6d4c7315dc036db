"""The C program of pda.c, compiled when asked for and called through ctypes."""

import ctypes
import shutil
import subprocess
from collections.abc import Callable
from pathlib import Path

import numpy as np
from scenes import Model

from filters.track import Scans

SOURCE = Path(__file__).with_name("pda.c")
OPTIONS = ("-O3", "-shared", "-fPIC")  # portable code: no -march=native, no -ffast-math


class NoCompiler(RuntimeError):
    """There is no gcc to compile with."""


def compiled_c_pda(folder: Path) -> Callable[[Model, Scans], tuple[np.ndarray, np.ndarray]]:
    """Compile into a folder.

    returns     function of model and scans: means (trials, scans, 4) and covariances
                (trials, scans, 4, 4) after every scan, all trials in one call of the C program
    raises      NoCompiler
    """
    compiler = shutil.which("gcc")
    if compiler is None:
        raise NoCompiler("no gcc on the path")
    library = folder / "pda.so"
    subprocess.run([compiler, *OPTIONS, "-o", library, SOURCE, "-lm"], check=True)
    run_pda = ctypes.CDLL(str(library)).run_pda
    array = np.ctypeslib.ndpointer(float, flags="C_CONTIGUOUS")
    offsets = np.ctypeslib.ndpointer(np.int64, flags="C_CONTIGUOUS")
    size = ctypes.c_int64
    run_pda.argtypes = [array, array, array, array, offsets, size, size, array, array]
    run_pda.restype = None

    def c_pda(model: Model, scans: Scans) -> tuple[np.ndarray, np.ndarray]:
        trials, length = scans.origins.shape
        means, covariances = np.empty((trials, length, 4)), np.empty((trials, length, 4, 4))
        run_pda(
            _packed(model),
            model.mean,
            model.covariance,
            scans.detections,
            scans.offsets,
            trials,
            length,
            means,
            covariances,
        )
        return means, covariances

    return c_pda


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
