"""The nu-gap: how far two models are apart as seen by a feedback loop, and what a loop can stand of it.

The pointwise distance of two models at a frequency is that of their graphs {(y, u)}; the nu-gap is its supremum where a
winding condition holds, and 1 where it fails (Vinnicombe, IEEE Trans. Automatic Control 38, 1993). With normalized
coprime factors the distance is the largest singular value of Nt2 M1 - Mt2 N1, a stable transfer function whose supremum
comes from level sets, poles on the axis or not. The winding condition says that det(G2~ G1), G = [N; M], has as many
zeros right of the axis as G2~ has poles; both are eigenvalues. A sampled model is mapped bilinearly, which changes
neither distance nor winding. Distances depend on units, so inputs and outputs are divided by given sizes first.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from ..core.model import Array
from ..core.outcome import Outcome
from .coprime import left_graph, right_graph
from .mapped import Complex, Mapped, eigen, mapped, near_axis
from .peak_gain import RISE, climb, peak, rounding
from .sensitivities import ILL_POSED, unstable_poles
from .transfer import Transfer

ONE = 1e-9  # a distance this near to 1 is 1: the graphs touch, whatever the winding count says
NORMAL = 1e-6  # most that |G~ G - 1| may be: beyond, the Riccati equation was not solved


@dataclass(frozen=True, slots=True)
class Gap:
    """value: between 0 and 1; frequency: rad per time unit, where the supremum is met, NaN where the winding condition
    fails; winding: whether it holds; error: of the value.
    """

    value: float
    frequency: float
    winding: bool
    error: float
    outcome: Outcome = Outcome.DONE


@dataclass(frozen=True, slots=True)
class StabilityMargin:
    """b(P, C) = 1 / ||[P; 1] (1 + K P)^-1 [K 1]||, from 0 to 1.

    value: 0 where the closed loop is unstable; frequency: rad per time unit, where it is met; error: of the value.
    """

    value: float
    frequency: float
    error: float
    outcome: Outcome = Outcome.DONE


def nu_gap(one: Transfer, other: Transfer, input_sizes: Array, output_sizes: Array) -> Gap:
    """The nu-gap of two models of the same inputs and outputs, divided by `input_sizes` (m,) and `output_sizes` (k,).

    Equal dead times drop out; for different ones there is no value. Raises ValueError where the models do not fit.
    """
    if one.D.shape != other.D.shape or one.step != other.step:
        raise ValueError(f"two models of shapes {one.D.shape} and {other.D.shape} do not fit, or their sample times")
    if one.delay != other.delay:
        return _undecided(Outcome.DEAD_TIMES)
    systems = [mapped(scaled(each, input_sizes, output_sizes)) for each in (one, other)]
    if not all(np.isfinite(each).all() for system in systems for each in (system.A, system.B, system.C, system.D)):
        return _undecided(Outcome.NOT_FINITE)
    if any(system.nyquist for system in systems):
        return _undecided(Outcome.AT_NYQUIST)
    return _between(*systems)


def scaled(transfer: Transfer, input_sizes: Array, output_sizes: Array) -> Transfer:
    """The same with inputs and outputs as shares of their sizes."""
    before, after = np.asarray(input_sizes, dtype=np.float64), np.asarray(output_sizes, dtype=np.float64)[:, np.newaxis]
    return replace(transfer, B=transfer.B * before, C=transfer.C / after, D=transfer.D * before / after)


def _between(one: Mapped, other: Mapped) -> Gap:
    graphs = [right_graph(one), right_graph(other), left_graph(other)]
    first, second, left = graphs
    if first is None or second is None or left is None:
        return _undecided(Outcome.UNVERIFIED)
    distance = _distance(first, left)
    value, where, done = climb(distance)
    touched = _touching(first, left, where)
    error = RISE * value + abs(touched - value) + rounding(distance, where)
    right, unsure = _winding(first, second)
    if touched >= 1.0 - ONE:
        return Gap(1.0, one.told(where), right == len(second.A), ONE)
    if unsure:
        return replace(_undecided(Outcome.UNVERIFIED), value=touched, error=1.0 - touched)
    if right != len(second.A):
        return Gap(1.0, math.nan, False, 0.0)
    accurate = done and abs(touched - value) <= NORMAL
    return Gap(min(1.0, touched), one.told(where), True, error, Outcome.DONE if accurate else Outcome.UNVERIFIED)


def _distance(first: Mapped, left: Mapped) -> Mapped:
    """Nt2 M1 - Mt2 N1 from [N1; M1] and [Nt2 Mt2]."""
    k = left.D.shape[0]
    m = left.D.shape[1] - k
    turned = np.hstack([-np.eye(k + m)[:, m:], np.eye(k + m)[:, :m]])
    B, D = left.B @ turned, left.D @ turned
    A = np.block([[left.A, B @ first.C], [np.zeros((len(first.A), len(left.A))), first.A]])
    C = np.hstack([left.C, D @ first.C])
    return Mapped(A, np.vstack([B @ first.D, first.B]), C, np.asarray(D @ first.D, dtype=np.float64), step=first.step)


def _touching(first: Mapped, left: Mapped, omega: float) -> float:
    """The distance at one frequency, from factors normalized there: no error of the Riccati equations is left."""
    at = np.array([omega])
    G, L = np.linalg.qr(first.respond(at)[0])[0], left.respond(at)[0]
    k = len(L)
    m = L.shape[1] - k
    across: Complex = np.hstack([-L[:, m:], L[:, :m]])
    rows = np.linalg.qr(across.conj().T)[0].conj().T
    return float(np.linalg.norm(rows @ G, 2))


def _winding(first: Mapped, second: Mapped) -> tuple[int, bool]:
    """Number of zeros of det(G2~ G1) right of the axis, -1 where one lies at infinity; whether some may lie on it."""
    D = second.D.T @ first.D
    if np.linalg.norm(D, -2) < 1e-12:
        return -1, False
    n, p = len(second.A), len(first.A)
    A = np.block([[-second.A.T, -second.C.T @ first.C], [np.zeros((p, n)), first.A]])
    B = np.vstack([-second.C.T @ first.D, first.B])
    C = np.hstack([second.B.T, second.D.T @ first.C])
    zeros = np.asarray(A - B @ np.linalg.solve(D, C), dtype=np.float64)
    if len(zeros) == 0:
        return 0, False
    values, _, _, match = eigen(zeros)
    return int(np.sum(values.real > 0)), bool(near_axis(zeros, values, match).any())


def stability_margin(plant: Transfer, controller: Transfer, input_sizes: Array, output_sizes: Array) -> StabilityMargin:
    """b(P, C) of a loop u = K (r - y): C = -K where the literature closes its loops by u = C y.

    plant: inputs of sizes `input_sizes` (m,), outputs of `output_sizes` (k,); controller: from outputs to inputs. Any
    model within a nu-gap g of the plant keeps arcsin b to within arcsin g. Raises ValueError where the two do not fit.
    """
    if controller.D.shape != plant.D.shape[::-1] or plant.step != controller.step:
        raise ValueError(f"plant of shape {plant.D.shape} and controller of {controller.D.shape} do not fit")
    if plant.delay or controller.delay:
        return StabilityMargin(math.nan, math.nan, math.inf, Outcome.DEAD_TIMES)
    P, K = scaled(plant, input_sizes, output_sizes), scaled(controller, output_sizes, input_sizes)
    whole = _four_blocks(P, K)
    if whole is None:
        return StabilityMargin(math.nan, math.nan, math.inf, Outcome.ILL_POSED)
    unstable, edge = unstable_poles(whole)
    if unstable or edge:
        return StabilityMargin(0.0, math.nan, 0.0, Outcome.DONE if unstable else Outcome.ON_THE_EDGE)
    found = peak(whole)
    return StabilityMargin(1.0 / found.value, found.frequency, found.error / found.value**2, found.outcome)


def _four_blocks(P: Transfer, K: Transfer) -> Transfer | None:
    """From what adds to the measurement's set point and to the input, (w1, w2), to (y, u): u = w2 + K (w1 - y)."""
    k, m = P.D.shape
    n, p = len(P.A), len(K.A)
    inner = np.eye(m) + K.D @ P.D
    if np.linalg.norm(inner, -2) <= ILL_POSED * np.linalg.norm(inner, 2):
        return None
    E = np.linalg.inv(inner)
    # u = E (Ck xk - Dk Cp xp + Dk w1 + w2)
    of_states, of_inputs = E @ np.hstack([-K.D @ P.C, K.C]), E @ np.hstack([K.D, np.eye(m)])
    y_states = np.hstack([P.C, np.zeros((k, p))]) + P.D @ of_states
    y_inputs = P.D @ of_inputs
    A = np.vstack(
        [np.hstack([P.A, np.zeros((n, p))]) + P.B @ of_states, np.hstack([np.zeros((p, n)), K.A]) - K.B @ y_states]
    )
    B = np.vstack([P.B @ of_inputs, K.B @ (np.hstack([np.eye(k), np.zeros((k, m))]) - y_inputs)])
    return Transfer(A, B, np.vstack([y_states, of_states]), np.vstack([y_inputs, of_inputs]), step=P.step)


def _undecided(outcome: Outcome) -> Gap:
    return Gap(math.nan, math.nan, False, math.inf, outcome)
