"""Scenes: truth and scans of detections, drawn or recorded."""
