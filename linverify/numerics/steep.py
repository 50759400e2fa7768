"""Slopes that grow without bound as the step falls: a root at the edge of its domain, or one odd about the point.

Narrowing windows see a root at a point inside; where its vertex is the last point of the domain no window has it
inside. The one-sided quotients tell: their changes from level to level fall to a quarter for a smooth function, to half
for x^1.5, and rise for a root (by two for the square root) or a jump (by four).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from ..core.model import Array
from .kinks import NEAR_NOTICE, GapFinding
from .levels import Quotients
from .windows import NEAR

RISING = 0.9  # changes of the quotient that fall by less than this a level have no limit
JUMPING = 3.4  # four is a jump, 2.5 a cube root
LEGIBLE = 30.0  # times their noise
FINEST = 3  # changes, at the finest levels


def steep_ends(
    quotients: Quotients, noise: Array, sizes: Array, scales: Array, known: Sequence[GapFinding]
) -> tuple[GapFinding, ...]:
    """Infinite one-sided slopes on the point, where no finding among `known` sits on it already."""
    taken = {(gap.row, gap.column) for gap in known if gap.maybe_near}
    floor = LEGIBLE * quotients.floors(noise)[1]
    findings = []
    for side in (quotients.forward, quotients.backward):
        change = np.abs(np.diff(side, axis=0))
        last = change[-FINEST:]
        rising = (last > floor[-FINEST:]).all(axis=0) & (last[1:] > RISING * last[:-1]).all(axis=0)
        rising &= last[-1] * sizes > NEAR_NOTICE * scales[:, np.newaxis]
        for row, column in np.argwhere(rising).tolist():
            if (row, column) in taken:
                continue
            taken.add((row, column))
            slope, step = float(side[-1, row, column]), float(quotients.steps[-1, column])
            if last[-1, row, column] > JUMPING * last[-2, row, column]:
                gap = abs(slope * step) / (NEAR * float(sizes[column]))
                findings.append(GapFinding(row, column, "jump", 0.0, gap, slope, slope, slope * step))
                continue
            gap = abs(slope - float(side[-1 - FINEST, row, column]))
            findings.append(GapFinding(row, column, "steep", 0.0, gap, slope, slope))
    return tuple(findings)
