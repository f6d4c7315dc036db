"""A study file from the disk: its text and the document in it, or what keeps it from being read."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import Any

from harness.study.lines import KeyLines
from harness.study.mistakes import Mistake, StudyError, key_text

_PLACE = re.compile(r" \(at (?:line (\d+), column \d+|end of document)\)$")
_SAID_TWICE = ("Cannot overwrite", "Cannot declare", "Duplicate", "Cannot mutate")
_REMEDIES = {
    "Invalid value": "put text in quotes, lists in [ ], and write numbers as 0.5 or 1e-4",
    "Expected newline": "give one key a line and put text in quotes",
    "Expected '='": "write key = value, or [table] for a table",
    "Unclosed array": "close the list by ] and put commas between its entries",
    "Illegal character": "end text by its quote on the same line",
    "Unterminated string": "end text by the quotes that begin it",
    "Invalid initial character": "begin a key with a letter, or put it in quotes",
}


def read_text(path: Path) -> str:
    """Return the text of a study file.

    raises      StudyError if it is missing, no file, not readable, not UTF-8 or empty
    """
    try:
        text = path.read_bytes().decode("utf-8-sig")  # some editors put a mark before UTF-8
    except FileNotFoundError:
        raise _unreadable(path, "does not exist", "check the path") from None
    except (IsADirectoryError, NotADirectoryError):
        raise _unreadable(path, "is no file", "name a study file in it") from None
    except UnicodeDecodeError as error:
        line = error.object[: error.start].count(b"\n") + 1
        raise _unreadable(path, "is not UTF-8 text", "save it as UTF-8", line) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise _unreadable(
            path, f"cannot be read ({reason})", "check the path and its rights"
        ) from None
    if not text.strip():
        raise _unreadable(
            path, "is empty", "a study needs at least a title, a scene and strategies"
        )
    return text


def parse(text: str, file: str) -> dict[str, Any]:
    """Return the document of a study file's text.

    raises      StudyError with the place if it is not TOML
    """
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise StudyError([_not_toml(text, str(error), file)]) from None
    except ValueError:
        rule = "holds a number of more digits than can be read"
        raise StudyError([Mistake(file, None, "", None, rule, "shorten it")]) from None
    except RecursionError:
        raise StudyError(
            [Mistake(file, None, "", None, "is nested too deeply", "lessen the brackets")]
        ) from None


def _unreadable(path: Path, rule: str, remedy: str, line: int | None = None) -> StudyError:
    return StudyError([Mistake(str(path), line, "", None, rule, remedy)])


def _not_toml(text: str, message: str, file: str) -> Mistake:
    place = _PLACE.search(message)
    reason = _PLACE.sub("", message)
    found = KeyLines(text)
    line = int(place[1]) if place and place[1] else None
    if reason.startswith(_SAID_TWICE) and found.repeated:
        path, again, first = found.repeated[0]
        return Mistake(
            file,
            again,
            key_text(path),
            None,
            f"is given twice, first in line {first}",
            _rename(path),
        )
    if line is None:  # the reader ran on to the end; say where the statement began
        line = found.open_since
    said = "" if line is None else text.split("\n")[line - 1].strip()[:60]
    remedy = next(
        (remedy for start, remedy in _REMEDIES.items() if reason.startswith(start)),
        "mend what stands there",
    )
    return Mistake(file, line, said, None, f"is not TOML: {reason[:1].lower()}{reason[1:]}", remedy)


def _rename(path: tuple[str | int, ...]) -> str:
    if len(path) == 2 and path[0] == "strategies":
        return "give each strategy a name of its own"
    return "keep one of the two"
