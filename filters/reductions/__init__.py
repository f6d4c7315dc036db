"""Reductions: from the table of hypotheses to the mixture that the next scan starts from."""
