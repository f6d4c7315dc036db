"""What a study holds fixed, as the subtitles of figures tell it."""

from __future__ import annotations

from harness.evidence.results import Results
from harness.report.numerals import distinct_labels, typeset_number, typeset_unit, with_unit
from harness.report.swept import short_name

_MOST = 3


def fixed_conditions(results: Results) -> list[str]:
    """Number of scans, and the numbers of the sensor that are not swept; a few at most."""
    scene = results.document.get("scene", {})
    told = [f"{scene['scans']} scans"] if "scans" in scene else []
    for name, value in scene.get("sensor", {}).items():
        swept = f"scene.sensor.{name}" in results.swept
        if isinstance(value, (int, float)) and not swept and len(told) <= _MOST:
            short, unit = short_name(name)
            label = typeset_number(distinct_labels([value])[0])
            told.append(f"{short} {with_unit(label, typeset_unit(unit))}")
    return told
