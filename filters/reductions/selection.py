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
def write_listed(n: int, hypotheses: Hypotheses, count: int, mixture: Mixture) -> None:
    """Write the first `count` listed rows as the components of the mixture."""
    table, means, covariances = hypotheses.table, hypotheses.means, hypotheses.covariances
    for place in range(count):
        h = table[place].listed
        spread = covariances[table[h].covariance]
        copy_gaussian(n, means[h], spread, mixture.means[place], mixture.covariances[place])
        mixture.weights[place] = table[h].weight
        mixture.modes[place] = table[h].mode
    rescale(mixture.weights, count)
