"""Trials: tasks, the store of results, and the driver that runs them."""
