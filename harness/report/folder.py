"""The results folder of a study: summary.csv, scans.parquet, and a manifest to vouch for them."""

from __future__ import annotations

import hashlib
import json
import os
import uuid
from pathlib import Path
from typing import Any

import pandas as pd

from harness.evidence.results import Results
from harness.trials.files import write_text_whole, write_whole

MANIFEST = "manifest.json"
_SUMMARY = "summary.csv"
_SCANS = "scans.parquet"
_CALIBRATION = "calibration.parquet"  # where the study asks for it
_FILES = {_SUMMARY, _SCANS}
_FORMAT = "trackassay results 1"


class ResultsError(Exception):
    """A results folder that can't be used; the message says why and what to do."""


def claim_folder(folder: Path, study: str) -> None:
    """Make sure that a study's results can be written to a folder, before anything is run.

    raises      ResultsError: it holds something that is not ours, another study's results, or
                can't be written
    """
    try:
        if folder.exists() and not folder.is_dir():
            raise ResultsError(f"{folder}: is a file; name a folder with --into")
        other = _study_of(folder)
        if other is None and folder.is_dir() and not _holds_nothing_else(folder):
            raise ResultsError(
                f"{folder}: holds files but no {MANIFEST} of this tool, so nothing was written; "
                "name another folder with --into"
            )
        if other not in (None, study):
            raise ResultsError(
                f"{folder}: holds the results of the study {other!r}; name another folder with "
                "--into"
            )
        folder.mkdir(parents=True, exist_ok=True)
        probe = folder / f".probe-{uuid.uuid4().hex[:8]}"
        probe.touch()
        probe.unlink()
    except OSError as error:
        raise ResultsError(
            f"{folder}: can't be written ({os.strerror(error.errno or 0)}); "
            "name another folder with --into"
        ) from error


def write_results(results: Results, folder: Path) -> None:
    """Write the results; each file is complete or as it was, and the manifest comes last.

    raises      OSError: the disk is full, or the folder can't be written
    """
    write_text_whole(folder / _SUMMARY, results.summary.to_csv(index=False))
    write_whole(folder / _SCANS, lambda beside: results.scans.to_parquet(beside, index=False))
    names = [_SUMMARY, _SCANS]
    calibration = results.calibration
    if calibration.empty:
        (folder / _CALIBRATION).unlink(missing_ok=True)
    else:
        names.append(_CALIBRATION)
        write_whole(
            folder / _CALIBRATION, lambda beside: calibration.to_parquet(beside, index=False)
        )
    files = {name: _digest(folder / name) for name in names}
    manifest = {**results.manifest, "files": files}
    write_text_whole(folder / MANIFEST, json.dumps(manifest, indent=1, default=str) + "\n")


def load_results(folder: Path) -> Results:
    """Read a results folder.

    raises      ResultsError: it is none, or a file in it is missing or damaged
    """
    manifest = _read_manifest(folder)
    for name, digest in manifest["files"].items():
        if not (folder / name).is_file():
            raise ResultsError(f"{folder / name}: missing; run the study again to restore it")
        if _digest(folder / name) != digest:
            raise ResultsError(
                f"{folder / name}: not as it was written (its digest differs from the manifest's); "
                "run the study again to restore it"
            )
    try:
        summary = pd.read_csv(folder / _SUMMARY, keep_default_na=True, dtype={"best_in": str})
    except pd.errors.EmptyDataError as error:
        raise ResultsError(
            f"{folder}: holds no case, as every task was set aside; {MANIFEST} says why"
        ) from error
    summary["best_in"] = summary["best_in"].fillna("")
    scans = pd.read_parquet(folder / _SCANS)
    has_calibration = _CALIBRATION in manifest["files"]
    calibration = pd.read_parquet(folder / _CALIBRATION) if has_calibration else pd.DataFrame()
    return Results(summary, scans, manifest["study"], manifest, folder, calibration)


def keys_of_results(folder: Path) -> set[str]:
    """Keys of the cases that a results folder was made from; none if it is no results folder."""
    try:
        return {str(case["key"]) for case in _read_manifest(folder)["cases"]}
    except (ResultsError, KeyError, TypeError):
        return set()


def _read_manifest(folder: Path) -> dict[str, Any]:
    path = folder / MANIFEST
    if not path.is_file():
        raise ResultsError(
            f"{folder}: no results there ({MANIFEST} is missing); run the study first"
        )
    try:
        manifest = json.loads(path.read_text(encoding="utf-8"))
        if manifest["format"] != _FORMAT:
            raise ResultsError(f"{path}: its format is {manifest['format']!r}, not {_FORMAT!r}")
        if not manifest["study"]["strategies"].keys() or not (manifest["files"].keys()) >= _FILES:
            raise KeyError("study, files")
    except (ValueError, KeyError, TypeError, AttributeError) as error:
        raise ResultsError(
            f"{path}: damaged ({error}); run the study again to restore it"
        ) from error
    return dict(manifest)


def _holds_nothing_else(folder: Path) -> bool:
    """Whether a folder is empty, or holds nothing but what a run writes, be it damaged."""
    names = {entry.name for entry in folder.iterdir() if not entry.name.startswith(".")}
    return names <= {MANIFEST, *_FILES, _CALIBRATION, "figures"}


def _study_of(folder: Path) -> str | None:
    """Name of the study whose results a folder holds; None if it can't be told."""
    try:
        return str(_read_manifest(folder)["name"])
    except (ResultsError, KeyError):
        return None


def _digest(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()
