"""The lines found are checked against the standard library's reader of TOML, which has none."""

import tomllib

import pytest

from harness.study.lines import KeyLines
from harness.study.mistakes import ABSENT, value_at

AWKWARD = '''\
# [not.a.table]
title = "a = 1 # no comment"   # x = 2
'quoted.dotted' = 1
"esc\\u0061ped" . inner = 2
text = """
[fake]
a = "b" \\""" still text
ends with a quote""""
raw = \'\'\'
b = [ 1,
\'\'\'
empty = ""
hash = '#'
when = 1979-05-27 07:32:00
list = [ # comment ]
  1, "]", [2,
  3], # , 9

  { deep = [4,
  5], more.of = 6 },
]
inline = { a.b = 1, "c d" = [ { e = 2 } ] }
[ table . "x y" ]
key = 1
[table]
z = 1
[[many]]
n = 1
[[many.inner]]
m = [1]
[[many.inner]]
m = 2
[many.last]
o = 3
[[many]]
n = 4
[many.last]
o = 5
last = true'''


def every_path(value, path=()):
    """Yield the path of everything in a document."""
    if path:
        yield path
    entries = (
        value.items()
        if isinstance(value, dict)
        else enumerate(value)
        if isinstance(value, list)
        else ()
    )
    for key, entry in entries:
        yield from every_path(entry, (*path, key))


@pytest.mark.parametrize("ending", ["\n", "\r\n"])
def test_every_key_that_the_standard_reader_finds_has_a_line_and_no_other_has(ending):
    text = AWKWARD.replace("\n", ending)
    found = KeyLines(text)
    document = tomllib.loads(text)
    assert set(found.lines) == set(every_path(document))
    assert found.open_since is None
    assert found.repeated == []


@pytest.mark.parametrize(
    ("path", "written"),
    [
        (("title",), "title ="),
        (("quoted.dotted",), "'quoted.dotted'"),
        (("escaped", "inner"), '"esc'),
        (("text",), "text ="),
        (("raw",), "raw ="),
        (("empty",), "empty ="),
        (("when",), "when ="),
        (("list", 0), '  1, "]"'),
        (("list", 2, 0), '  1, "]"'),
        (("list", 2, 1), "  3],"),
        (("list", 3, "deep"), "  { deep"),
        (("list", 3, "deep", 1), "  5], more"),
        (("list", 3, "more", "of"), "  5], more"),
        (("inline", "c d", 0, "e"), "inline ="),
        (("table",), "[table]"),
        (("table", "x y"), '[ table . "x y" ]'),
        (("table", "x y", "key"), "key = 1"),
        (("many", 0, "inner", 1, "m"), "m = 2"),
        (("many", 1, "last", "o"), "o = 5"),
        (("many", 1, "last", "last"), "last = true"),
    ],
)
def test_a_key_has_the_line_on_which_it_is_written(path, written):
    lines = AWKWARD.splitlines()
    (line,) = [number for number, text in enumerate(lines, 1) if text.startswith(written)]
    assert KeyLines(AWKWARD).lines[path] == line
    assert value_at(tomllib.loads(AWKWARD), path) is not ABSENT


@pytest.mark.parametrize(
    ("text", "repeated"),
    [
        ("a = 1\nb = 2\na = 3\n", (("a",), 3, 1)),
        ("a = 1\na = [\n1,\n2]", (("a",), 2, 1)),
        ("[x]\n[y]\n[x]\n", (("x",), 3, 1)),
        ("[x]\na.b = 1\na.b = 2", (("x", "a", "b"), 3, 2)),
        ("t = { a = 1,\na = 2 }", (("t", "a"), 2, 1)),
        ("[[m]]\na = 1\n[[m]]\na = 1\na = 2", (("m", 1, "a"), 5, 4)),
    ],
)
def test_what_is_stated_again_is_found_with_both_lines(text, repeated):
    assert KeyLines(text).repeated == [repeated]


@pytest.mark.parametrize(
    ("text", "line"),
    [
        ("a = 1\nb = [1,\n2,\n", 2),
        ('a = 1\n\nb = """\ntext\n', 3),
        ("a = 1\nb 2\nc = 3", 2),
        ("[a\nb = 1", 1),
        ("a = 1\nb = { c = 1", 2),
        ("a = " + "[" * 5000, 1),
    ],
)
def test_a_statement_that_never_ends_is_named_by_its_first_line(text, line):
    assert KeyLines(text).open_since == line
