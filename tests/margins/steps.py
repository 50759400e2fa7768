"""Overshoot and settling of a closed loop's step, by looking at it at a great many times. Shared with nothing."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .wired import Wired, held

BAND = 0.02
PER_TURN = 80
MOST = 1_500_000
MOST_SAMPLES, LOOKS = 20_000, 24
LAST = 1e-3  # of the final value: where what is left cannot matter


@dataclass(frozen=True)
class Step:
    """final value; overshoot as a fraction of it; settling to 2 %; tie: whether a swing just grazes the band."""

    final: float
    overshoot: float
    settling: float
    tie: bool


def stepped(wired: Wired) -> list[Step] | None:
    """Of every set point, without dead time; None where it would take too long."""
    A, B, C = wired.flow()
    if wired.sample:
        A, B = held(A, B, wired.sample)
    whole, put = closed(wired, A, B, C)
    seen = np.hstack([C, np.zeros((len(C), len(wired.outer.A)))])
    still = np.eye(len(whole)) if wired.sample else np.zeros_like(whole)
    rest = np.linalg.solve(still - whole, put)
    found = []
    for i in range(len(C)):
        course = _samples(wired, whole, put[:, i], i) if wired.sample else _times(whole, seen[i], rest[:, i])
        if course is None:
            return None
        found.append(_figures(*course, float(seen[i] @ rest[:, i])))
    return found


def closed(wired: Wired, A: np.ndarray, B: np.ndarray, C: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The loop's matrix and its inputs from the set points."""
    K = wired.outer
    return np.block([[A - B @ K.D @ C, B @ K.C], [-K.B @ C, K.A]]), np.vstack([B @ K.D, K.B])


Course = tuple[np.ndarray, np.ndarray]


def _times(whole: np.ndarray, seen: np.ndarray, rest: np.ndarray) -> Course | None:
    """y(t) = final - seen exp(whole t) rest by eigenvectors."""
    values, vectors = np.linalg.eig(whole)
    shares = (seen @ vectors) * np.linalg.solve(vectors, rest + 0j)
    final = float(seen @ rest)
    big = np.abs(shares) > 1e-7 * abs(final)
    values, shares = values[big], shares[big]
    if not values.size:
        return np.zeros(1), np.full(1, final)
    end = float((np.log(np.abs(shares) * values.size / (LAST * abs(final))) / -values.real).max())
    step = 2.0 * np.pi / np.abs(values).max() / PER_TURN
    if not end / step < MOST:
        return None
    t = np.arange(0.0, max(end, 2.0 * step), step)
    y = np.full(t.size, final)
    for value, share in zip(values, shares, strict=True):
        y -= (share * np.exp(value * t)).real
    return t, y


def _samples(wired: Wired, whole: np.ndarray, put: np.ndarray, i: int) -> Course | None:
    """From instant to instant, with LOOKS looks between two."""
    A, B, C = wired.flow()
    K, h, n = wired.outer, float(wired.sample or 1.0), len(A)
    count = int(np.log(1e-9) / np.log(np.abs(np.linalg.eigvals(whole)).max())) + 10
    if count > MOST_SAMPLES:
        return None
    moved = [held(A, B, h * j / LOOKS) for j in range(LOOKS)]
    rows = np.stack([np.concatenate([C[i] @ Ad, C[i] @ Bd]) for Ad, Bd in moved])
    unit = np.eye(len(C))[i]
    x, y = np.zeros(len(whole)), np.empty((count, LOOKS))
    for k in range(count):
        command = K.D @ (unit - C @ x[:n]) + K.C @ x[n:]
        y[k] = rows @ np.concatenate([x[:n], command])
        x = whole @ x + put
    return np.arange(count * LOOKS) * h / LOOKS, y.ravel()


def _figures(t: np.ndarray, y: np.ndarray, final: float) -> Step:
    off = y / final - 1.0
    settled = [_last(t, off, BAND * scale) for scale in (0.998, 1.0, 1.002)]
    tie = settled[0] - settled[2] > 0.02 * settled[1] + 2.0 * (t[1] - t[0] if t.size > 1 else 0.0)
    return Step(final, max(float(off.max()), 0.0), settled[1], tie)


def _last(t: np.ndarray, off: np.ndarray, band: float) -> float:
    """The last time outside, between two points by a straight line."""
    outside = np.flatnonzero(np.abs(off) > band)
    if not outside.size:
        return 0.0
    k = int(outside[-1])
    if k + 1 >= t.size:
        return float(t[k])
    a, b = abs(off[k]) - band, abs(off[k + 1]) - band
    return float(t[k] + (t[k + 1] - t[k]) * a / (a - b))
