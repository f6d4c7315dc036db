"""Clutter maps: intensity of the Poisson process of false detections."""
