import pickle
import re

import pytest

from harness.study.mistakes import StudyError
from harness.study.study import load_study, study_from


def said(path):
    with pytest.raises(StudyError) as raised:
        load_study(path)
    return str(raised.value)


def test_a_missing_file_is_said_to_be_missing(tmp_path):
    path = tmp_path / "none.toml"
    assert said(path) == f"{path}: does not exist; check the path"


def test_a_folder_is_no_study(tmp_path):
    assert said(tmp_path) == f"{tmp_path}: is no file; name a study file in it"


def test_a_path_below_a_file_is_no_study(study_file):
    path = study_file() / "x.toml"
    assert said(path) == f"{path}: is no file; name a study file in it"


def test_a_name_that_no_file_can_have_is_said_to_be_unreadable():
    assert said("a\0b.toml").endswith(
        "cannot be read (embedded null byte); check the path and its rights"
    )


@pytest.mark.parametrize("content", [b"", b" \n\n\t", b"\xef\xbb\xbf"])
def test_an_empty_file_is_said_to_be_empty(tmp_path, content):
    path = tmp_path / "empty.toml"
    path.write_bytes(content)
    assert said(path).startswith(f"{path}: is empty; a study needs at least")


def test_text_in_another_encoding_is_named_with_its_line(tmp_path):
    path = tmp_path / "latin.toml"
    path.write_bytes('seed = 1\ntitle = "Föhr"\n'.encode("latin-1"))
    assert said(path) == f"{path}:2: is not UTF-8 text; save it as UTF-8"


def test_the_mark_that_some_editors_put_before_utf_8_is_no_mistake(tmp_path, study_text):
    path = tmp_path / "marked.toml"
    path.write_text(study_text(), encoding="utf-8-sig")
    assert load_study(path).title == "Buoy tender in fog"


@pytest.mark.parametrize(
    ("line", "message"),
    [
        ("seed 12", "seed 12: is not TOML: expected '=' after a key"),
        ("seed = .5", "seed = .5: is not TOML: invalid value; put text in quotes"),
        ("seed = 12 13", "seed = 12 13: is not TOML: expected newline"),
        ('seed = "12', 'seed = "12: is not TOML: illegal character'),
        ("seed = 12-", "seed = 12-: is not TOML: expected newline"),
    ],
)
def test_what_is_not_toml_is_named_with_its_line(said_of, line, message):
    (text,) = said_of(("seed = 12", line))
    assert text.startswith(f"fog.toml:2: {message}")


@pytest.mark.parametrize("value", ['"""Fog', "[1,\n2", "{ a = 1", "'''Fog"])
def test_a_value_that_runs_on_to_the_end_of_the_file_is_named_where_it_begins(tmp_path, value):
    path = tmp_path / "open.toml"
    path.write_text(f"seed = 12\n\ntitle = {value}")
    assert said(path).startswith(f"{path}:3: title = {value.splitlines()[0]}: is not TOML: ")


def test_a_key_given_twice_is_named_with_both_lines(said_of):
    assert said_of(("trials = 100", "trials = 100\nseed = 13")) == [
        "fog.toml:4: seed: is given twice, first in line 2; keep one of the two"
    ]


def test_a_key_given_twice_in_the_last_line_is_named_with_both_lines(said_of):
    """The standard reader says only 'end of document' here."""
    assert said_of(("cutoff_m = 30.0\n", "cutoff_m = 30.0\ncutoff_m = 31.0")) == [
        "fog.toml:39: gospa.cutoff_m: is given twice, first in line 38; keep one of the two"
    ]


def test_two_strategies_of_one_name_are_named_with_both_lines(said_of):
    assert said_of(("[strategies.mixture]", "[strategies.pda]")) == [
        "fog.toml:27: strategies.pda: is given twice, first in line 24; "
        "give each strategy a name of its own"
    ]


def test_a_number_of_thousands_of_digits_is_said_to_be_too_long(said_of):
    (text,) = said_of(("seed = 12", "seed = 1" + "0" * 6000))
    assert text == "fog.toml: holds a number of more digits than can be read; shorten it"
    (text,) = said_of(("seed = 12", "seed = 0x1" + "0" * 6000))
    assert text.startswith("fog.toml:2: seed = a number of thousands of digits: must be at most")


def test_brackets_without_end_are_said_to_be_too_deep(said_of):
    (text,) = said_of(("seed = 12", "seed = " + "[" * 5000))
    assert text == "fog.toml: is nested too deeply; lessen the brackets"


def test_a_study_in_python_is_named_by_its_keys_alone():
    with pytest.raises(StudyError, match=re.escape('seed = "1": must be a whole number, not text')):
        study_from({"seed": "1"})
    with pytest.raises(StudyError, match="fog: is no table; give a dict"):
        study_from([1], "fog")


def test_a_study_in_python_does_not_follow_later_changes_of_its_tables(study_file):
    tables = load_study(study_file()).document
    study = study_from(tables, "fog")
    tables["scene"]["scans"] = 0
    assert (study.name, study.path, study.document["scene"]["scans"]) == ("fog", None, 30)


def test_mistakes_are_records_that_survive_the_way_between_processes():
    with pytest.raises(StudyError) as raised:
        study_from({"seed": -1})
    sent = pickle.loads(pickle.dumps(raised.value))
    assert sent.mistakes == raised.value.mistakes
    (seed,) = [mistake for mistake in sent.mistakes if mistake.key == "seed"]
    assert (seed.file, seed.line, seed.value) == (None, None, "-1")
    assert (seed.rule, seed.remedy) == ("must be at least 0", "give a whole number")


def test_only_so_many_mistakes_are_written_out(said_of):
    values = ", ".join(f"-{value}" for value in range(1, 101))
    lines = said_of(("[2.0, 4.0]", f"[{values}]"))
    assert len(lines) == 31
    assert lines[-1] == "... and 70 more"


def test_marks_that_only_some_readers_take_for_line_ends_do_not_shift_lines(said_of):
    (text,) = said_of(('"Buoy tender in fog"', '"Buoy\u2028tender"'), ("seed = 12", "seed 12"))
    assert text.startswith("fog.toml:2: seed 12: is not TOML")
