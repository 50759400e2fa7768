"""A second opinion where no search succeeded: scipy's bounded least squares, another code than ours.

It minimizes the residual instead of solving for zero, so it ends at the point that comes nearest. Its own verdict on
success is not looked at.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from ..core.model import Array
from .equations import Equations
from .newton import Ends, jacobian, largest, solve

MOST = 6  # ends to go on from: it costs a call a column, and distinct good ends are few


def stragglers(system: Equations, ends: Ends) -> Ends:
    """Ends of least squares from the first start's end and the best others, each followed by Newton steps."""
    order = [0, *np.argsort(ends.worst, kind="stable")]
    chosen: list[Array] = []
    for j in order:
        z = ends.z[:, j]
        apart = all(np.abs(z - other).max(initial=0.0) > 1e-3 for other in chosen)
        if np.isfinite(ends.worst[j]) and apart and len(chosen) < MOST:
            chosen.append(z)
    low, high = system.box
    usable = high > low
    if not chosen or not usable.any():
        return Ends(ends.z[:, :0], ends.residual[:, :0], ends.worst[:0])
    z = np.stack([_squeezed(system, z, usable) for z in chosen], axis=1)
    residual = system.residual(z)
    polished = solve(system, z)
    return Ends(
        np.concatenate([z, polished.z], axis=1),
        np.concatenate([residual, polished.residual], axis=1),
        np.concatenate([largest(residual), polished.worst]),
    )


def _squeezed(system: Equations, z: Array, usable: NDArray[np.bool_]) -> Array:
    from scipy.optimize import least_squares  # a fifth of a second to import, and most trims never need it

    low, high = system.box

    def filled(part: Array) -> Array:
        whole = z.copy()
        whole[usable] = part
        return whole[:, np.newaxis]

    def value(part: Array) -> Array:
        return system.residual(filled(part))[:, 0]

    def slope(part: Array) -> Array:
        whole = filled(part)
        slopes = jacobian(system, whole, system.residual(whole))[0]
        return np.asarray(np.nan_to_num(slopes[:, usable]), dtype=np.float64)

    inside = np.clip(z[usable], low[usable], high[usable])
    if not np.isfinite(value(inside)).all():
        return z
    try:
        answer = least_squares(
            value,
            inside,
            jac=slope,
            bounds=(low[usable], high[usable]),
            method="trf",
            x_scale=1.0,
            ftol=1e-10,  # Newton steps follow; this only has to come near
            xtol=1e-10,
            gtol=1e-12,
            max_nfev=100,
        )
    except ValueError:
        return z  # the search moved to where the plant cannot be called at all
    return filled(np.asarray(answer.x, dtype=np.float64))[:, 0]
