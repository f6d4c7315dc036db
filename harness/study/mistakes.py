"""What is wrong with a study, said so that it can be mended: place, key, value, rule and remedy."""

from __future__ import annotations

import json
import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any

KeyPath = tuple[str | int, ...]

STATED = object()  # a finding's value is what the study says at its path
ABSENT = object()  # there is no value

_LONGEST_VALUE = 60
_MOST_SHOWN = 30
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")


@dataclass(frozen=True)
class Mistake:
    """One mistake in a study.

    file        the study file, None for a study made in Python
    line        from 1; None where the file has no line for it
    key         dotted; empty if the file as a whole is meant
    value       as a study file would say it; None if there is none
    rule        what is wrong, to be read behind the key
    remedy      what to do instead
    """

    file: str | None
    line: int | None
    key: str
    value: str | None
    rule: str
    remedy: str

    def __str__(self) -> str:
        place = self.file if self.line is None else f"{self.file}:{self.line}"
        said = self.key if self.value is None else f"{self.key} = {self.value}"
        parts = [self.file and place, said, f"{self.rule}; {self.remedy}"]
        return ": ".join(part for part in parts if part)


class StudyError(ValueError):
    """A study that cannot be run; its text has one line a mistake."""

    def __init__(self, mistakes: Iterable[Mistake]) -> None:
        self.mistakes = tuple(mistakes)
        super().__init__(self.mistakes)

    def __str__(self) -> str:
        lines = [str(mistake) for mistake in self.mistakes[:_MOST_SHOWN]]
        left = len(self.mistakes) - len(lines)
        if left:
            lines.append(f"... and {left} more")
        return "\n".join(lines)


@dataclass(frozen=True)
class Finding:
    """A mistake by the path of its key in the document, before the line is looked up."""

    path: KeyPath
    rule: str
    remedy: str
    value: Any = STATED
    shown: KeyPath | None = None  # what to call the key, if not by its path


class Findings(Exception):
    """What a check found, on its way to the one who knows the file."""

    def __init__(self, findings: Iterable[Finding]) -> None:
        self.findings = list(findings)
        super().__init__(self.findings)


def mistakes_of(
    findings: Iterable[Finding],
    document: Mapping[str, Any],
    file: str | None = None,
    lines: Mapping[KeyPath, int] | None = None,
) -> tuple[Mistake, ...]:
    """Place findings in a file, in the order of its lines, each said once."""
    mistakes = {}
    for finding in findings:
        value = value_at(document, finding.path) if finding.value is STATED else finding.value
        mistake = Mistake(
            file,
            _line_of(finding.path, lines or {}),
            key_text(finding.path if finding.shown is None else finding.shown),
            None if value is ABSENT or isinstance(value, dict) else value_text(value),
            finding.rule,
            finding.remedy,
        )
        mistakes[mistake] = mistake.line or float("inf")
    return tuple(sorted(mistakes, key=mistakes.__getitem__))


def value_at(document: Any, path: KeyPath) -> Any:
    """Return what a document says at a path, ABSENT if nothing."""
    value = document
    for key in path:
        try:
            value = value[key]
        except (KeyError, IndexError, TypeError):
            return ABSENT
    return value


def key_text(path: KeyPath) -> str:
    """Return a path as a study file would write it, with the place in a list in brackets."""
    text = ""
    for key in path:
        if isinstance(key, int):
            text += f"[{key}]"
        else:
            name = str(key)
            text += ("." if text else "") + (
                name if _BARE_KEY.fullmatch(name) else json.dumps(name, ensure_ascii=False)
            )
    return text


def value_text(value: Any) -> str:
    """Return a value as a study file would write it, shortened."""
    text = _toml(value)
    return text if len(text) <= _LONGEST_VALUE else text[: _LONGEST_VALUE - 4] + " ..."


def _toml(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return json.dumps(value[: 2 * _LONGEST_VALUE], ensure_ascii=False)
    if isinstance(value, list | tuple):
        return f"[{', '.join(_toml(entry) for entry in value[:_LONGEST_VALUE])}]"
    if isinstance(value, dict):
        entries = [f"{key_text((key,))} = {_toml(entry)}" for key, entry in value.items()]
        return f"{{ {', '.join(entries)} }}"
    if isinstance(value, float):
        return repr(float(value))
    try:
        return str(value)
    except ValueError:  # an integer of more digits than Python is willing to write
        return "a number of thousands of digits"


def _line_of(path: KeyPath, lines: Mapping[KeyPath, int]) -> int | None:
    """Line of the key, or of the nearest table or list around it."""
    for length in range(len(path), 0, -1):
        if path[:length] in lines:
            return lines[path[:length]]
    return None
