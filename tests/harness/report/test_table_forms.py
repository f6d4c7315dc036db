import csv
import io
import re
from dataclasses import replace
from html import unescape

import pytest
from markdown_it import MarkdownIt

from harness.report.tables import as_csv, as_latex, as_markdown, comparison_table, overall_table
from harness.report.tables.latex import escaped as latex_escaped
from harness.report.tables.markdown import escaped as markdown_escaped

AWKWARD = r"a|b & c_d <e> *f* `g` [h](i) #j ~k $l$ 5% {m} \n ^o ~p~"


@pytest.fixture
def awkward(not_a_number):
    """A question, and swept values that are text, full of signs that mean something elsewhere."""
    key = "scene.target.motion"
    summary, scans = not_a_number.summary.copy(), not_a_number.scans.copy()
    for frame in (summary, scans):
        frame[key] = frame[key].replace({"coordinated-turn": AWKWARD})
    document = {**not_a_number.document, "question": f"Is {AWKWARD} right?\nOr not?"}
    return replace(not_a_number, summary=summary, scans=scans, document=document)


def test_csv_reads_back_as_it_was(awkward):
    rows = list(csv.DictReader(io.StringIO(as_csv(comparison_table(awkward)))))
    assert [row["motion"] for row in rows] == ["nearly-constant-velocity", AWKWARD]


def test_csv_leaves_out_what_has_no_value(all_lost):
    rows = list(csv.DictReader(io.StringIO(as_csv(comparison_table(all_lost, "anees")))))
    assert rows[0]["ANEES, mixture"] == ""
    assert "ANEES, mixture, low" not in rows[0]


def test_csv_marks_the_best_in_a_column_of_its_own(study):
    rows = list(csv.DictReader(io.StringIO(as_csv(comparison_table(study)))))
    marks = [row["track loss [%], nearest, best"] for row in rows]
    nearest = study.summary[study.summary["strategy"] == "nearest"]
    assert marks == ["*" if "track_loss" in names else "" for names in nearest["best_in"]]
    assert "track loss [%], known, best" not in rows[0]


def test_markdown_shows_texts_as_they_are(awkward):
    """Rendered by a general-purpose CommonMark library with pipe tables."""
    html = MarkdownIt("commonmark").enable("table").render(as_markdown(comparison_table(awkward)))
    question = re.search("<p><strong>(.*?)</strong></p>", html)[1]
    assert unescape(question) == f"Is {AWKWARD} right? Or not?"
    cells = re.findall("<td>(.*?)</td>", html)
    assert AWKWARD in [unescape(cell) for cell in cells]


def test_markdown_has_a_cell_for_every_value(study):
    html = MarkdownIt("commonmark").enable("table").render(as_markdown(comparison_table(study)))
    assert html.count("<tr>") == 28
    assert html.count("</th>") == 9
    assert html.count("</td>") == 27 * 9
    assert "0* (0–1.0)" in re.sub(" +", " ", html)


@pytest.mark.parametrize("text", [AWKWARD, "|", "&lt;", "<b>", "a_b_c", "\\", "*"])
def test_markdown_escapes_round_trip(text):
    html = MarkdownIt("commonmark").render(f"x {markdown_escaped(text)} x")
    assert unescape(html) == f"<p>x {text} x</p>\n"


def test_latex_escapes_every_special_character():
    """The ten special characters of LaTeX (Lamport, LaTeX, 1994, section 2.1), and | < >."""
    assert latex_escaped(r"# $ % & ~ _ ^ \ { }") == (
        r"\# \$ \% \& \textasciitilde{} \_ \textasciicircum{} \textbackslash{} \{ \}"
    )
    assert latex_escaped("a|b <c>") == r"a\textbar{}b \textless{}c\textgreater{}"
    assert latex_escaped("[1] 2–3") == "{[}1] 2--3"


@pytest.mark.parametrize("make", [comparison_table, overall_table])
def test_every_latex_line_has_the_cells_of_its_tabular(awkward, make):
    text = as_latex(make(awkward))
    body = re.search(r"\\begin\{tabular\}\{(.*)\}\n(.*)\\end\{tabular\}", text, re.DOTALL)
    columns = len(re.findall("[lr]", body[1].replace("@{ }", "")))
    for line in body[2].splitlines():
        if line == r"\hline":
            continue
        assert line.endswith(r" \\")
        spans = [int(span) for span in re.findall(r"\\multicolumn\{(\d+)\}", line)]
        separators = len(re.findall(r"(?<!\\)&", line))
        assert separators + 1 + sum(spans) - len(spans) == columns
    opened, closed = (len(re.findall(rf"(?<!\\){brace}", text)) for brace in (r"\{", r"\}"))
    assert opened == closed


def test_latex_fills_up_what_a_number_lacks_behind_its_point(study):
    lines = as_latex(comparison_table(study)).splitlines()
    first = next(line for line in lines if line.startswith("1e-5"))
    assert first.split(" & ")[3] == r"0*\phantom{.8}"


def test_heads_without_soft_hyphens_outside_latex(study):
    table = overall_table(study)
    assert "a scan, hypotheses" in as_csv(table)
    assert "a scan, hypotheses" in as_markdown(table)
    assert r"hypo\-theses" in as_latex(table)
