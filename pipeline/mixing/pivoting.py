"""One step of block principal pivoting, which every walk over supports takes."""

from __future__ import annotations

from pipeline.mixing.compiled import compiled_step as _step

PATIENCE = 3  # whole exchanges allowed without progress before pivoting one at a time
PIVOTS_PER_UNKNOWN = 8  # then the walk leads nowhere


@_step
def exchanged(support: int, violated: int, fewest: int, patience: int) -> tuple[int, int, int]:
    """Return the next support, and with it the fewest violations so far and the patience that is left.

    All violated unknowns change sides, or where that has stalled only the last of them (Portugal, Judice and
    Vicente 1994).
    """
    count = last = 0
    rest = violated
    while rest:
        last = rest
        rest &= rest - 1
        count += 1
    if count < fewest:
        fewest = count
        patience = PATIENCE
    else:
        patience -= 1
    return support ^ (violated if patience >= 0 else last), fewest, patience
