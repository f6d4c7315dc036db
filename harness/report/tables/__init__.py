"""Tables: one record, written as text, CSV, Markdown or LaTeX."""

from harness.report.tables.comparison import DEFAULT_METRICS, comparison_table
from harness.report.tables.csv_text import as_csv
from harness.report.tables.latex import as_latex
from harness.report.tables.markdown import as_markdown
from harness.report.tables.overall import overall_table
from harness.report.tables.table import Table
from harness.report.tables.text import as_text

__all__ = [
    "DEFAULT_METRICS",
    "Table",
    "as_csv",
    "as_latex",
    "as_markdown",
    "as_text",
    "comparison_table",
    "overall_table",
]
