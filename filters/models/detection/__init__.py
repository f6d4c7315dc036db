"""Detection laws: how probably a target is detected at a scan."""
