"""Functions of a user's own sensor, from a Python file: loaded, compiled and tried out.

The file is loaded under a private module name, the same in every process, so that workers load it
themselves. The compiled functions check what the user's give: a number that is none raises.
"""

from __future__ import annotations

import functools
import hashlib
import importlib.util
import math
import sys
from collections.abc import Callable
from pathlib import Path
from types import ModuleType
from typing import Any, NamedTuple

import numba
import numpy as np

from filters.compiled import COMPILING
from filters.models.contract import MEASUREMENT_MATRIX, MEASUREMENT_OF
from filters.models.sensor.noise import behind_noise

# The step of central differences that balances their error against rounding.
_STEP = float(np.cbrt(np.finfo(float).eps))
_CLOSE = 1e-4  # how near a user's Jacobian must come to central differences, of its largest entry


class OwnFileError(Exception):
    """A user's file that cannot be used.

    rule        what is wrong, to be read behind FILE.py:NAME
    remedy      what to do instead
    """

    def __init__(self, rule: str, remedy: str) -> None:
        super().__init__(rule, remedy)
        self.rule, self.remedy = rule, remedy

    def __str__(self) -> str:
        return f"{self.rule}; {self.remedy}"


class OwnSource(NamedTuple):
    """Where a user's functions are, and what the file held when that was looked at."""

    path: Path
    name: str
    digest: str


class OwnFunctions(NamedTuple):
    """A user's functions in plain Python."""

    measure: Callable[..., None]
    jacobian: Callable[..., None] | None


def source_of(path: Path, name: str) -> OwnSource:
    """Look at a file without importing it.

    raises      OwnFileError: it is not there
    """
    try:
        text = path.read_bytes()
    except OSError as error:
        reason = "does not exist" if isinstance(error, FileNotFoundError) else "cannot be read"
        raise OwnFileError(
            f"names a file that {reason}: {path}",
            "a path is taken from the folder of the study file",
        ) from None
    return OwnSource(path, name, hashlib.sha256(text).hexdigest())


@functools.cache
def load(source: OwnSource) -> OwnFunctions:
    """Import the file and find its functions: NAME, and NAME_jacobian if it has that.

    raises      OwnFileError
    """
    module = _module(source.path, source.digest)
    functions = {
        name: getattr(value, "py_func", value)
        for name, value in vars(module).items()
        if callable(value) and not name.startswith("_")
    }
    if source.name not in functions:
        has = ", ".join(name for name in functions if not name.endswith("_jacobian"))
        raise OwnFileError(
            f"names no function of that file, which has {has or 'none'}", "correct the name"
        )
    return OwnFunctions(functions[source.name], functions.get(f"{source.name}_jacobian"))


@functools.cache
def _module(path: Path, digest: str) -> ModuleType:
    name = f"trackassay_own_{hashlib.sha256(str(path).encode()).hexdigest()[:16]}"
    spec = importlib.util.spec_from_file_location(name, path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules[name] = module
    try:
        spec.loader.exec_module(module)
    except (Exception, SystemExit) as error:
        del sys.modules[name]
        raise OwnFileError(
            f"cannot be imported: {_said(error)}", f"see what python {path.name} says"
        ) from error
    return module


@functools.cache
def compiled(source: OwnSource, periods: tuple[float, ...]) -> tuple[Any, Any]:
    """Return measurement and Jacobian as kernels take them; without one, central differences.

    periods     2 pi for each component that wraps, 0 for the others
    raises      OwnFileError
    """
    functions = load(source)
    measure = _checked_measurement(len(periods), _inlined(functions.measure))
    if functions.jacobian is None:
        jacobian = _central_differences(periods, _inlined(measure))
    else:
        jacobian = _checked_jacobian(len(periods), _inlined(functions.jacobian))
    try:
        return _to_pointer(MEASUREMENT_OF, measure), _to_pointer(MEASUREMENT_MATRIX, jacobian)
    except Exception as error:  # whatever the compiler says
        raise OwnFileError(
            f"does not compile: {_gist(error)}", "use what numba can compile: scalars, loops, math"
        ) from error


# A user's function may allocate, so it is compiled with numba's counting of references. What stands
# in a closure, as these do, numba cannot keep on disk; each process compiles them anew.
_OPTIONS: dict[str, Any] = {"error_model": "numpy", "nogil": True}


def _inlined(function: Callable[..., Any]) -> Callable[..., Any]:
    return numba.njit(**_OPTIONS)(function) if COMPILING else function


def _to_pointer(signature: Any, function: Callable[..., Any]) -> Any:
    return numba.cfunc(signature, **_OPTIONS)(function) if COMPILING else function


def _checked_measurement(m: int, measure: Any) -> Callable[..., None]:
    def own_measurement(parameters: Any, site: Any, state: Any, out: Any) -> None:
        for i in range(m):
            out[i] = math.nan
        measure(parameters[behind_noise(m, parameters) :], site, state, out)
        for i in range(m):
            if not math.isfinite(out[i]):
                raise ValueError("a sensor of your own gave a measurement that is no number")

    return own_measurement


def _checked_jacobian(m: int, jacobian: Any) -> Callable[..., None]:
    def own_jacobian(parameters: Any, site: Any, state: Any, out: Any) -> None:
        out[:] = 0.0
        jacobian(parameters[behind_noise(m, parameters) :], site, state, out)
        for i in range(m):
            for k in range(out.shape[1]):
                if not math.isfinite(out[i, k]):
                    raise ValueError("a sensor of your own gave a Jacobian that holds no number")

    return own_jacobian


def _central_differences(periods: tuple[float, ...], measure: Any) -> Callable[..., None]:
    m = len(periods)

    def own_differences(parameters: Any, site: Any, state: Any, out: Any) -> None:
        axes = site.shape[0] // 2
        moved, low, high = state.copy(), np.empty(m), np.empty(m)
        for k in range(state.shape[0]):
            # Position and velocity change on the scale of their distance from the sensor's.
            scale = abs(state[k])
            if k < 2 * axes:
                first = (k // axes) * axes
                for entry in range(first, first + axes):
                    scale = max(scale, abs(state[entry] - site[entry]))
            step = _STEP * max(scale, 1.0)
            moved[k] = state[k] + step
            width = moved[k]
            measure(parameters, site, moved, high)
            moved[k] = state[k] - step
            width -= moved[k]
            measure(parameters, site, moved, low)
            moved[k] = state[k]
            for i in range(m):
                change = high[i] - low[i]
                if periods[i] > 0.0:
                    change -= periods[i] * round(change / periods[i])
                out[i, k] = change / width

    return own_differences


def try_out(
    source: OwnSource,
    periods: tuple[float, ...],
    parameters: np.ndarray,
    site: np.ndarray,
    state: np.ndarray,
) -> None:
    """Run the functions in plain Python at a state, and compile them.

    parameters  as the compiled functions take them
    raises      OwnFileError
    """
    functions, m = load(source), len(periods)
    place = f"at site {_numbers(site)} and state {_numbers(state)}"
    own = parameters[m + 1 + 2 * int(parameters[m]) :]
    measured = np.full(m, math.nan)
    _run(functions.measure, (own, site, state.copy(), measured), place)
    if not np.isfinite(measured).all():
        raise OwnFileError(
            f"measures {_numbers(measured)} {place}", "write a number into each entry of out"
        )
    compiled(source, periods)
    if functions.jacobian is not None:
        _compare_jacobians(functions, periods, parameters, site, state, place)


def _compare_jacobians(
    functions: OwnFunctions,
    periods: tuple[float, ...],
    parameters: np.ndarray,
    site: np.ndarray,
    state: np.ndarray,
    place: str,
) -> None:
    assert functions.jacobian is not None
    m, n = len(periods), len(state)
    own = parameters[m + 1 + 2 * int(parameters[m]) :]
    stated, expected = np.zeros((m, n)), np.empty((m, n))
    _run(functions.jacobian, (own, site, state.copy(), stated), place)
    plain = _checked_measurement(m, functions.measure)
    _run(_central_differences(periods, plain), (parameters, site, state, expected), place)
    largest = np.abs(expected).max(axis=1, keepdims=True)
    if not np.all(np.abs(stated - expected) <= _CLOSE * largest + 1e-12):
        wrong = int(np.nanargmax(np.abs(stated - expected).max(axis=1)))
        raise OwnFileError(
            f"has a Jacobian whose row {wrong} is {_numbers(stated[wrong])} where central "
            f"differences give {_numbers(expected[wrong])}, {place}",
            "correct NAME_jacobian, or leave it out",
        )


def _run(function: Callable[..., None], arguments: tuple[Any, ...], place: str) -> None:
    try:
        with np.errstate(all="ignore"):
            function(*arguments)
    except Exception as error:  # whatever a user's function does
        raise OwnFileError(f"raises {_said(error)} {place}", "correct the function") from error


def _numbers(values: np.ndarray) -> str:
    return f"[{', '.join(f'{value:.6g}' for value in values)}]"


def _said(error: BaseException) -> str:
    return f"{type(error).__name__}: {error}" if str(error) else type(error).__name__


def _gist(error: Exception) -> str:
    """The line of a compiler's long message that says what is wrong."""
    lines = [line.strip() for line in str(error).splitlines()]
    telling = [line for line in lines if line and not line.startswith(("Failed in", "During:"))]
    return telling[0] if telling else type(error).__name__
