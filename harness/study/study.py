"""Studies: read, checked whole, and laid out in conditions and cases."""

from __future__ import annotations

import copy
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from filters.models.sensor.own import FOLDER
from harness.study.assumed import assumed_scene, assumption_findings
from harness.study.blame import closeness, laid_at
from harness.study.expand import Condition, conditions_of
from harness.study.fit import unfit_strategies
from harness.study.keys import STUDY, keys_of
from harness.study.lines import KeyLines
from harness.study.mistakes import (
    ABSENT,
    Finding,
    Findings,
    Mistake,
    StudyError,
    mistakes_of,
    value_at,
)
from harness.study.names import nearest
from harness.study.reader import parse, read_text
from harness.study.schema import StudyDocument
from harness.study.sweep import (
    SweptKey,
    axes_of,
    changed,
    key_findings,
    swept_groups,
    value_findings,
    with_first_values,
)
from harness.study.wording import findings_of


@dataclass(frozen=True)
class Study:
    """A checked study.

    name        what its results are called: the file's name without its ending
    path        its file, None if it has none
    document    what it says, as read; not to be changed
    record      the same, checked; swept keys that the document leaves out have their first values
    conditions  in the order of the sweeps, the last varying fastest
    """

    name: str
    path: Path | None
    document: dict[str, Any]
    record: StudyDocument
    conditions: tuple[Condition, ...]

    @property
    def title(self) -> str:
        """What the study is about."""
        return self.record.title

    @property
    def question(self) -> str:
        """The question that it shall answer; may be empty."""
        return self.record.question

    @property
    def seed(self) -> int:
        """Start of all random numbers."""
        return self.record.seed

    @property
    def trials(self) -> int:
        """Number of trials of each condition."""
        return self.record.trials

    @property
    def swept(self) -> tuple[str, ...]:
        """Dotted names of the swept keys: the grid's, then those that move together."""
        return tuple(self.conditions[0].settings)

    @property
    def strategies(self) -> tuple[str, ...]:
        """Names of the strategies in the order of the study."""
        return tuple(self.record.strategies)

    def with_changes(self, changes: Mapping[str, Any]) -> Study:
        """Return the study with other values at some keys, checked anew.

        changes     dotted key -> value, a whole table or list too; None removes the key. What is
                    swept is changed at "sweep.KEY" or by a new "sweep".
        raises      StudyError
        """
        document = self.document
        unknown: list[Finding] = []
        for key, value in changes.items():
            path = _changed_path(key)
            wrong = _unknown_change(path, value, document)
            unknown += wrong
            document = document if wrong else _replaced(document, path, value)
        try:
            findings = unknown or _changes_without_effect(changes, document)
            if findings:
                raise Findings(findings)
            return _study(document, self.name, self.path)
        except Findings as found:
            raise StudyError(mistakes_of(found.findings, document)) from None


def load_study(path: str | Path) -> Study:
    """Read a study file.

    raises      StudyError: the file cannot be read, is not TOML or says what a study cannot say
    """
    path = Path(path)
    text = read_text(path)
    document = parse(text, str(path))
    try:
        return _study(document, path.stem, path)
    except Findings as found:
        lines = KeyLines(text).lines
        raise StudyError(mistakes_of(found.findings, document, str(path), lines)) from None


def study_from(document: Mapping[str, Any], name: str = "study") -> Study:
    """Make a study from tables made in Python, of the same form as a study file.

    raises      StudyError
    """
    if not isinstance(document, Mapping):
        raise StudyError(
            [
                Mistake(
                    None, None, name, None, "is no table", "give a dict as a study file would say"
                )
            ]
        )
    own = copy.deepcopy(dict(document))
    try:
        return _study(own, name, None)
    except Findings as found:
        raise StudyError(mistakes_of(found.findings, own)) from None


def study_error(study: Study, findings: Iterable[Finding]) -> StudyError:
    """What is found wrong with a study after it was read, placed in its file if it has one."""
    file, lines = None, {}
    if study.path is not None:
        file, lines = str(study.path), KeyLines(read_text(study.path)).lines
    return StudyError(mistakes_of(findings, study.document, file, lines))


def _study(document: dict[str, Any], name: str, path: Path | None) -> Study:
    folder = Path() if path is None else path.parent
    groups = swept_groups(document)
    known = keys_of(document)
    filled, first_values = with_first_values(document, groups, known)
    findings = [
        *key_findings(groups, known),
        *value_findings(groups, known),
        *_assumption_findings(filled),
    ]
    try:
        record = StudyDocument.model_validate(filled, context={FOLDER: folder})
    except ValidationError as error:
        found = _at_their_sweeps(findings_of(error, STUDY), document, first_values)
        raise Findings(findings + _not_yet_said(found, findings)) from None
    if not findings:
        findings = _wrong_assumed_scenes(record, folder)
    if findings:
        raise Findings(findings)
    conditions = conditions_of(filled, axes_of(groups, known), folder)
    findings = unfit_strategies(conditions)
    if findings:
        raise Findings(findings)
    return Study(name, path, document, record, conditions)


def _assumption_findings(document: Mapping[str, Any]) -> list[Finding]:
    strategies = document.get("strategies")
    return [
        finding
        for name, strategy in (strategies.items() if isinstance(strategies, Mapping) else ())
        if isinstance(strategy, Mapping)
        for finding in assumption_findings(
            strategy.get("assumes", {}), document.get("scene"), ("strategies", name, "assumes")
        )
    ]


def _wrong_assumed_scenes(record: StudyDocument, folder: Path) -> list[Finding]:
    findings: list[Finding] = []
    for name, strategy in record.strategies.items():
        try:
            assumed_scene(record.scene, strategy.assumes, ("strategies", name, "assumes"), folder)
        except Findings as found:
            findings += found.findings
    return findings


def _at_their_sweeps(
    findings: list[Finding], document: Mapping[str, Any], filled: Sequence[tuple[SweptKey, Any]]
) -> list[Finding]:
    """Lay those findings at the sweeps that the document has only by their first values."""
    if not filled:
        return findings
    try:
        StudyDocument.model_validate(document)
        own = set()
    except ValidationError as error:
        own = {(finding.path, finding.rule) for finding in findings_of(error, STUDY)}
    laid = []
    for finding in findings:
        if (finding.path, finding.rule) not in own:
            swept, value = max(filled, key=lambda pair: closeness(pair[0], finding.path))
            finding = laid_at(swept, 0, value, finding)
        laid.append(finding)
    return laid


def _not_yet_said(findings: list[Finding], said: list[Finding]) -> list[Finding]:
    """Leave out what lies in a place that is known to be wrong as a whole."""
    places = {finding.path for finding in said}
    return [
        finding
        for finding in findings
        if not any(finding.path[:length] in places for length in range(1, len(finding.path) + 1))
    ]


def _changed_path(key: str) -> tuple[str, ...]:
    table, _, rest = key.partition(".")
    return (table, rest) if table == "sweep" and rest else tuple(key.split("."))


def _replaced(document: dict[str, Any], path: tuple[str, ...], value: Any) -> dict[str, Any]:
    if value is not None:
        return changed(document, path, copy.deepcopy(value))
    table = value_at(document, path[:-1])
    if not isinstance(table, Mapping) or path[-1] not in table:
        return document
    kept = {key: entry for key, entry in table.items() if key != path[-1]}
    return changed(document, path[:-1], kept)


def _unknown_change(path: tuple[str, ...], value: Any, document: dict[str, Any]) -> list[Finding]:
    """Return what is wrong with a key to be changed; its value is checked with the whole."""
    key = ".".join(path)
    known = keys_of(document)
    is_new_strategy = len(path) == 2 and path[0] == "strategies" and isinstance(value, Mapping)
    is_of_sweeps = path[0] == "sweep" or path == ("sweep_together",)
    if key in known or is_new_strategy or is_of_sweeps:
        return []
    alike = nearest(key, known)
    remedy = f"did you mean {alike}?" if alike else "name it as in scene.sensor.noise_sd_m"
    if path[0] == "sweep_together":
        remedy = 'change "sweep_together" as a whole'
    return [Finding(path, "is no key of the study", remedy, ABSENT if value is None else value)]


def _changes_without_effect(changes: Mapping[str, Any], document: dict[str, Any]) -> list[Finding]:
    swept = {key.key for group in swept_groups(document) for key in group}
    return [
        Finding(
            tuple(key.split(".")),
            "is swept, so this value would not be used",
            f'change "sweep.{key}", or remove that by None',
            value,
        )
        for key, value in changes.items()
        if key in swept and value is not None
    ]
