"""Text on figures: its width, and its lines."""

from __future__ import annotations

import functools
import re

from harness.report.style import FONT

POINTS_PER_INCH = 72.0
LINE_SPACING = 1.25
NO_BREAK_SPACE = "\u00a0"

_PIECES = re.compile(r"[^_.+-]+[_.+-]*|[_.+-]+")


@functools.lru_cache(maxsize=4096)
def text_width(text: str, size: float, bold: bool = False) -> float:
    """Width of a line of text in inches; size in points."""
    from matplotlib.font_manager import FontProperties
    from matplotlib.textpath import text_to_path

    font = FontProperties(family=FONT, size=size, weight="bold" if bold else "normal")
    width, _, _ = text_to_path.get_text_width_height_descent(text, font, ismath=False)
    return float(width) / POINTS_PER_INCH


def line_height(size: float) -> float:
    """Height of a line of text in inches."""
    return size * LINE_SPACING / POINTS_PER_INCH


def broken(text: str, size: float, width: float, bold: bool = False) -> list[str]:
    """Text in lines no wider than `width` inches; only a word too long for a line is cut."""
    return [
        line
        for paragraph in text.replace(" %", NO_BREAK_SPACE + "%").split("\n")
        for line in _broken_paragraph(paragraph, size, width, bold)
    ]


def _broken_paragraph(text: str, size: float, width: float, bold: bool) -> list[str]:
    lines: list[str] = []
    for word in text.split(" "):
        if lines and text_width(f"{lines[-1]} {word}", size, bold) <= width:
            lines[-1] = f"{lines[-1]} {word}"
        else:
            lines += _cut(word, size, width, bold)
    return lines


def joined_parts(text: str) -> list[str]:
    """Parts of a text that a line need not cut: ends at spaces and at signs that join words."""
    return [part for word in text.split(" ") for part in _PIECES.findall(word)]


def _cut(word: str, size: float, width: float, bold: bool) -> list[str]:
    """A word in lines: cut behind signs that join words, and anywhere if that is not enough."""
    lines = [""]
    for piece in _PIECES.findall(word):
        fits = text_width(piece, size, bold) <= width
        for part in [piece] if fits else piece:
            if lines[-1] and text_width(lines[-1] + part, size, bold) > width:
                lines.append("")
            lines[-1] += part
    return lines
