"""Figures as files that are the same bytes for the same figure."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from harness.report.style import house_style

if TYPE_CHECKING:
    from matplotlib.figure import Figure

# What would differ from run to run, or from version to version, is left out.
_METADATA: dict[str, dict[str, Any]] = {
    "svg": {"Date": None, "Creator": None},
    "pdf": {"CreationDate": None, "Creator": None, "Producer": None},
    "png": {"Software": None},
}


@house_style()
def save_figure(
    figure: Figure, path_stem: str | Path, formats: Sequence[str] = ("svg", "pdf", "png")
) -> list[Path]:
    """Write a figure as PATH_STEM.svg and so on; returns the paths.

    raises   ValueError: a format is none of svg, pdf, png
    """
    for name in formats:
        if name not in _METADATA:
            raise ValueError(f"figures are written as {', '.join(_METADATA)}, not as {name!r}")
    paths = []
    for name in formats:
        path = Path(f"{path_stem}.{name}")
        figure.savefig(path, format=name, metadata=_METADATA[name])
        paths.append(path)
    return paths
