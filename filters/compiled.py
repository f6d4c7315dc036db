"""How compiled code is made here: kernels, the helpers they call, and model functions.

Three decorators, so that compiler options, caching and error handling are decided in one place:

`helper`          compiled into whatever calls it; takes sizes as arguments, so constants reach it
`kernel`          an entry point called from Python; cached on disk
`model_function`  a function of a fixed signature that kernels call through a pointer, so that one
                  compiled kernel serves every sensor and motion, a user's own too

`NUMBA_DISABLE_JIT=1` gives plain Python everywhere (for coverage and debugging).
"""

from __future__ import annotations

import functools
import hashlib
import inspect
import os
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, ClassVar, TypeVar

import llvmlite
import numba
import numpy as np
from numba.core import caching, types
from numba.core import config as numba_config
from numba.core.typing.templates import AbstractTemplate, infer_global

Function = TypeVar("Function", bound=Callable[..., Any])

config: Any = numba_config  # its switches are made at run time
COMPILING = not config.DISABLE_JIT
# Kernels allocate nothing: their callers hand them all room. Without numba's counting of references
# (_nrt=False), which is then of no use, they run twice as fast.
_OPTIONS: dict[str, Any] = {"error_model": "numpy", "nogil": True, "_nrt": False}
_SOURCES = Path(__file__).resolve().parent.parent


@functools.cache
def source_digest(*parts: str) -> str:
    """Digest of the Python sources of the parts named: folders or files, e.g. "filters/models"."""
    digest = hashlib.sha256()
    for part in parts:
        place = _SOURCES / part
        for path in [place] if place.is_file() else sorted(place.rglob("*.py")):
            digest.update(path.relative_to(_SOURCES).as_posix().encode())
            digest.update(path.read_bytes())
    return digest.hexdigest()


class WholeSourceLocator(caching.UserWideCacheLocator):
    """Places compiled code, and calls it stale when any source of the project changed.

    Numba's own stamp covers the file of the decorated function only, so a change in a helper of
    another file would leave old machine code in use. The stamp here covers every source file that
    can reach a kernel, the versions that generate code, and the debugging switches.
    """

    def __init__(self, py_func: Callable[..., Any], py_file: str) -> None:
        super().__init__(py_func, py_file)
        if config.CACHE_DIR:
            self._cache_path = os.path.join(
                config.CACHE_DIR, self.get_suitable_cache_subpath(py_file)
            )

    def get_source_stamp(self) -> tuple[object, ...]:
        """Everything that the machine code depends on beside the function itself."""
        own_file = hashlib.sha256(Path(self._py_file).read_bytes()).hexdigest()
        switches = (config.BOUNDSCHECK, config.OPT)
        return (
            own_file,
            source_digest("filters", "harness/scene"),
            np.__version__,
            llvmlite.__version__,
            *map(str, switches),
        )


@contextmanager
def _cached_by_whole_source() -> Iterator[None]:
    """Use our locator while decorating only: other users of numba keep theirs."""
    before = config.CACHE_LOCATOR_CLASSES
    config.CACHE_LOCATOR_CLASSES = f"{__name__}.{WholeSourceLocator.__name__}"
    try:
        yield
    finally:
        config.CACHE_LOCATOR_CLASSES = before


def _no_place_to_cache(error: RuntimeError) -> bool:
    return "no locator available" in str(error)


def helper(function: Function) -> Function:
    """Compile a function that kernels call; it is compiled and cached as part of them.

    It is always inlined, so that sizes passed as constants reach its loops.
    """
    return numba.njit(forceinline=True, **_OPTIONS)(function)


def kernel(function: Function) -> Function:
    """Compile an entry point, cached on disk where a place can be written, else in memory."""
    if not COMPILING:  # compiled words wrap and 1 / 0 is infinite without a warning
        return np.errstate(all="ignore")(function)
    with _cached_by_whole_source():
        try:
            return numba.njit(cache=True, **_OPTIONS)(function)
        except RuntimeError as error:
            if not _no_place_to_cache(error):
                raise
    return numba.njit(**_OPTIONS)(function)


def chosen_by_type(argument: str, choices: dict[type, Any]) -> Any:
    """Return a function that stands for one of several helpers: by the type of one argument.

    The class of a record is known when compiling, so the other helpers are not even compiled;
    numbers that kernels are built with would reach the helpers as numbers, and all be compiled.

    argument    its name in the helpers, which all take the same
    choices     class of that argument, a NamedTuple, and the helper for it
    """
    plain = {kind: getattr(choice, "py_func", choice) for kind, choice in choices.items()}
    place = list(inspect.signature(next(iter(plain.values()))).parameters).index(argument)

    def stand_in(*arguments: Any) -> Any:
        return plain[type(arguments[place])](*arguments)

    class Chosen(AbstractTemplate):  # numba's overload() would compile the helpers once more
        key = stand_in
        prefer_literal = True  # as helpers are called, so that sizes reach them as constants
        entries: ClassVar[dict[Any, Any]] = {}

        def generic(self, kinds: Any, keywords: Any) -> Any:
            kind: Any = types.Dispatcher(choices[kinds[place].instance_class])
            signature = kind.get_call_type(self.context, kinds, keywords)
            self.entries[signature.args] = kind.get_overload(signature)
            return signature

        def get_impl_key(self, signature: Any) -> Any:
            return self.entries[signature.args]

    infer_global(stand_in, types.Function(Chosen))
    return stand_in


def compile_to_pointer(signature: Any, function: Callable[..., Any]) -> Any:
    """Compile for calls through a pointer with a fixed signature, cached like a kernel."""
    if not COMPILING:
        return function
    with _cached_by_whole_source():
        try:
            return numba.cfunc(signature, cache=True, **_OPTIONS)(function)
        except RuntimeError as error:
            if not _no_place_to_cache(error):
                raise
    return numba.cfunc(signature, **_OPTIONS)(function)


class ModelFunction:
    """A model function: plain Python when called from Python, compiled when first asked for.

    Compiling at import would cost 0.1 s a function, even for `--help`.
    """

    def __init__(self, signature: Any, function: Callable[..., Any]) -> None:
        self.signature = signature
        self.function = function
        functools.update_wrapper(self, function)

    def __call__(self, *arguments: Any) -> Any:
        """Run the plain Python function."""
        return self.function(*arguments)

    @functools.cached_property
    def compiled(self) -> Any:
        """The function as kernels take it."""
        return compile_to_pointer(self.signature, self.function)


def model_function(signature: Any) -> Callable[[Callable[..., Any]], ModelFunction]:
    """Mark a function as a model function of the given signature."""

    def mark(function: Callable[..., Any]) -> ModelFunction:
        return ModelFunction(signature, function)

    return mark


class CompiledCodeError(RuntimeError):
    """A compiled model function raised; the kernel that called it went on with stale values."""


@contextmanager
def raising_what_compiled_code_raised() -> Iterator[None]:
    """Turn exceptions inside model functions, which compiled callers swallow, into one error.

    raises      CompiledCodeError at the end of the block, from the first exception
    """
    caught: list[BaseException] = []
    before = sys.unraisablehook

    def keep(event: Any) -> None:
        if event.exc_value is not None and not caught:
            caught.append(event.exc_value)

    sys.unraisablehook = keep
    try:
        yield
    finally:
        sys.unraisablehook = before
    if caught:
        raise CompiledCodeError(f"a model function raised {caught[0]!r}") from caught[0]
