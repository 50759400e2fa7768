"""A linear transfer function in state space with one dead time: what loops are made of and margins are taken from."""

from __future__ import annotations

from dataclasses import dataclass

from ..core.model import Array


@dataclass(frozen=True, slots=True, eq=False)
class Transfer:
    """y = (C (s I - A)^-1 B + D) exp(-s delay) u, or the same in z where `step` is given (then delay is zero).

    A (n, n), B (n, m), C (k, n), D (k, m) in the plant's units and per its time unit; delay, step in time units;
    inputs, outputs: names of the channels. A loop transfer function L has as many inputs as outputs; its loop is closed
    by u = -y, so that the poles of the closed loop are where det(I + L) = 0. change (n, n): A - I of a sampled one
    where it is known to more digits than A shows, as after fast sampling of slow states (`bilinear.held_change`).
    """

    A: Array
    B: Array
    C: Array
    D: Array
    delay: float = 0.0
    step: float | None = None
    inputs: tuple[str, ...] = ()
    outputs: tuple[str, ...] = ()
    change: Array | None = None

    def __post_init__(self) -> None:
        n, m, k = self.A.shape[0], self.B.shape[1], self.C.shape[0]
        if self.A.shape != (n, n) or self.B.shape != (n, m) or self.C.shape != (k, n) or self.D.shape != (k, m):
            shapes = ", ".join(str(each.shape) for each in (self.A, self.B, self.C, self.D))
            raise ValueError(f"A, B, C, D do not fit together: {shapes}")
        if self.delay and self.step is not None:
            raise ValueError("a dead time of a sampled transfer function belongs into its states")
        if self.change is not None and (self.step is None or self.change.shape != self.A.shape):
            raise ValueError("`change` is A - I of a sampled transfer function")
