"""Reductions: from the table of hypotheses to the smaller mixture that the next scan starts from."""
