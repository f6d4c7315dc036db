"""Linearisations: what a Gaussian says of a measurement that is no linear function of the state."""
