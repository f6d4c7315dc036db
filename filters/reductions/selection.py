"""Steps that reductions share: light hypotheses dropped, the heaviest listed and written."""

from __future__ import annotations

from typing import Any

from filters.compiled import helper
from filters.hypotheses import Hypotheses
from filters.mixture import Mixture, copy_gaussian


@helper
def rescale(weights: Any, count: int) -> None:
    """Make the first `count` weights sum to one."""
    total = 0.0
    for i in range(count):
        total += weights[i]
    for i in range(count):
        weights[i] /= total


@helper
def drop_light(table: Any, rows: int, prune_below: float) -> None:
    """Set weights below a limit to zero; the heaviest row always stays."""
    most = 0.0
    for h in range(rows):
        most = max(most, table[h].weight)
    limit = min(prune_below, most)
    for h in range(rows):
        if table[h].weight < limit:
            table[h].weight = 0.0


@helper
def list_heaviest(table: Any, rows: int, most: int) -> int:
    """List up to `most` rows in the column `listed`, heaviest first, none of weight zero.

    returns     how many are listed
    """
    count = 0
    for h in range(rows):
        weight = table[h].weight
        if not weight > 0.0:
            continue
        if count < most:
            count += 1
        elif weight <= table[table[count - 1].listed].weight:
            continue
        place = count - 1
        while place > 0 and table[table[place - 1].listed].weight < weight:
            table[place].listed = table[place - 1].listed
            place -= 1
        table[place].listed = h
    return count


@helper
def write_row(n: int, hypotheses: Hypotheses, h: int, mixture: Mixture, place: int) -> None:
    """Write row h of the table as one component of the mixture."""
    row = hypotheses.table[h]
    spread = hypotheses.covariances[row.covariance]
    to_mean, to_spread = mixture.means[place], mixture.covariances[place]
    copy_gaussian(n, hypotheses.means[h], spread, to_mean, to_spread)
    mixture.weights[place] = row.weight
    mixture.modes[place] = row.mode


@helper
def write_listed(n: int, hypotheses: Hypotheses, count: int, mixture: Mixture) -> None:
    """Write the first `count` listed rows as the components of the mixture."""
    for place in range(count):
        write_row(n, hypotheses, hypotheses.table[place].listed, mixture, place)
    rescale(mixture.weights, count)
