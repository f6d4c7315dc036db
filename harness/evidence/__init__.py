"""Evidence: plans, summaries and comparisons of trials."""
