"""Metrics of single-target tracking on plain arrays: trials first, then scans."""
