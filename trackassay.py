"""trackassay: Monte Carlo performance evaluation of single-target trackers in clutter.

The command starts here, and so do Python users:

    import trackassay
    study = trackassay.load_study("studies/smoke.toml").with_changes({"trials": 500})
    outcome = trackassay.run_study(study)
    outcome.results.summary        # a data frame, one row a case
"""

from __future__ import annotations

import importlib
import importlib.util
import sys
from pathlib import Path
from typing import Any

_PACKAGES = ("harness", "filters", "metrics")
_HERE = Path(__file__).resolve().parent
_PUBLIC = {
    "load_study": "harness.study.study",
    "study_from": "harness.study.study",
    "study_json_schema": "harness.study.json_schema",
    "run_study": "harness.api",
    "find_results": "harness.api",
    "check_study": "harness.api",
    "load_results": "harness.report.folder",
    "comparison_table": "harness.report.tables.comparison",
    "all_figures": "harness.report.figures",
}

__all__ = list(_PUBLIC)


class ShadowedPackageError(ImportError):
    """Another package or file stands where one of ours should be found."""


def check_nothing_shadows_us() -> None:
    """Check that our packages are the ones that Python would import.

    Their names are general, so a file of the same name in the current folder, or another
    distribution, can come first.

    raises      ShadowedPackageError naming what stands in the way
    """
    for name in _PACKAGES:
        spec = importlib.util.find_spec(name)
        ours = _HERE / name / "__init__.py"
        found = None if spec is None else spec.origin
        if found is None or Path(found).resolve() != ours:
            where = found or (list(spec.submodule_search_locations or []) if spec else "nowhere")
            raise ShadowedPackageError(
                f"trackassay needs its own package {name!r} at {ours.parent}, but Python finds "
                f"{where}; run from another folder, rename that file, or remove the other package"
            )


def main() -> int:
    """Run the command line; return its exit code."""
    try:
        check_nothing_shadows_us()
    except ShadowedPackageError as error:
        print(f"trackassay: {error}", file=sys.stderr)
        return 2
    return int(importlib.import_module("harness.cli").main())


def __getattr__(name: str) -> Any:
    if name not in _PUBLIC:
        raise AttributeError(f"module 'trackassay' has no attribute {name!r}")
    check_nothing_shadows_us()
    return getattr(importlib.import_module(_PUBLIC[name]), name)


if __name__ == "__main__":
    sys.exit(main())
