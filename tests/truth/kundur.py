"""One machine on an infinite bus, classical and with its field circuit, in per unit and seconds.

P. Kundur, Power System Stability and Control, McGraw-Hill 1994, examples 12.2 and 12.3. Data of 12.3 seen in a public
transcription; published results are values from memory.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass
from functools import cache

import numpy as np

from linverify.core.plant import Plant

W0, H, X_E = 2 * math.pi * 60, 3.5, 0.65
TRANSIENT = 0.3  # transient reactance
TERMINAL, POWER, REACTIVE = 1.0, 0.9, 0.3
CURRENT = (complex(POWER, REACTIVE) / TERMINAL).conjugate()
BUS = TERMINAL - 1j * X_E * CURRENT
INNER = TERMINAL + 1j * TRANSIENT * CURRENT
ANGLE = cmath.phase(INNER / BUS)  # rad, 49.92 deg in print


def swing(t, x, u, p):
    speed, angle = x
    power = abs(INNER) * abs(BUS) * np.sin(angle) / (X_E + TRANSIENT)
    return np.stack([(u[0] - power - p["damping"] * speed) / (2 * H), W0 * speed + 0 * angle])


classical = Plant(
    states={"speed": "pu", "angle": "rad"},
    inputs={"torque": "pu"},
    parameters={"damping": 0.0},
    dynamics=swing,
    nominal={"speed": 0.01, "angle": 0.2, "torque": 0.1},
)


@dataclass(frozen=True)
class Field:
    """The machine with its field circuit, linear about the operating point, by the formulas of section 12.3.

    A (3, 3) of speed, angle and field flux; drive (3,) of the field voltage; seen (3,) of the terminal voltage (its
    entries are K5 and K6); constants: K1 to K6.
    """

    A: np.ndarray
    drive: np.ndarray
    seen: np.ndarray
    constants: tuple[float, ...]


@cache
def field_circuit() -> Field:
    Ld, Lq, Ll, Ra, T, A, B, psi_1 = 1.81, 1.76, 0.16, 0.003, 8.0, 0.031, 6.93, 0.8
    Lad, Laq = Ld - Ll, Lq - Ll
    Lfd = Lad * (TRANSIENT - Ll) / (Lad - TRANSIENT + Ll)
    Rfd = (Lad + Lfd) / (W0 * T)
    gap = abs(TERMINAL + (Ra + 1j * Ll) * CURRENT)
    saturating = A * math.exp(B * (gap - psi_1))
    total, small = gap / (gap + saturating), 1 / (1 + B * saturating)
    inner = cmath.phase(TERMINAL + (Ra + 1j * total * Laq + 1j * Ll) * CURRENT)
    delta = inner - cmath.phase(BUS)
    frame = cmath.exp(-1j * inner)
    iq, id_ = (CURRENT * frame).real, -(CURRENT * frame).imag
    eq, ed = (TERMINAL * frame).real, -(TERMINAL * frame).imag
    i_fd = (eq + Ra * iq + (total * Lad + Ll) * id_) / (total * Lad)
    psi_ad, psi_aq = total * Lad * (i_fd - id_), -total * Laq * iq
    Lads, Laqs = small * Lad, small * Laq
    L_ads = Lads * Lfd / (Lads + Lfd)
    X_Tq, X_Td, R_T = X_E + Laqs + Ll, X_E + L_ads + Ll, Ra
    D = R_T**2 + X_Tq * X_Td
    E_B = abs(BUS)
    m1 = E_B * (X_Tq * math.sin(delta) - R_T * math.cos(delta)) / D
    n1 = E_B * (R_T * math.sin(delta) + X_Td * math.cos(delta)) / D
    m2, n2 = X_Tq / D * Lads / (Lads + Lfd), R_T / D * Lads / (Lads + Lfd)
    K1 = n1 * (psi_ad + Laqs * id_) - m1 * (psi_aq + L_ads * iq)
    K2 = n2 * (psi_ad + Laqs * id_) - m2 * (psi_aq + L_ads * iq) + L_ads / Lfd * iq
    a32 = -W0 * Rfd / Lfd * m1 * L_ads
    a33 = -W0 * Rfd / Lfd * (1 - L_ads / Lfd + m2 * L_ads)
    b32 = W0 * Rfd / Lad
    K5 = ed * (-Ra * m1 + (Ll + Laqs) * n1) + eq * (-Ra * n1 - (Ll + L_ads) * m1)
    K6 = ed * (-Ra * m2 + (Ll + Laqs) * n2) + eq * (-Ra * n2 - Ll * m2 + L_ads * (1 / Lfd - m2))
    K5, K6 = K5 / TERMINAL, K6 / TERMINAL
    matrix = np.array([[0.0, -K1 / (2 * H), -K2 / (2 * H)], [W0, 0.0, 0.0], [0.0, a32, a33]])
    constants = (K1, K2, -b32 / a33, -a32 / b32, K5, K6)
    return Field(matrix, np.array([0.0, 0.0, b32]), np.array([0.0, K5, K6]), constants)


def with_field() -> np.ndarray:
    """A (3, 3) of speed, angle and field flux in manual excitation."""
    return field_circuit().A


# section 12.3 to 12.5, all from memory: K1 to K6, and eigenvalues in manual excitation, with the voltage regulator
# (gain 200 behind a transducer of 0.02 s) and with the stabilizer too (9.5, washout 1.4 s, lead 0.154 s over 0.033 s)
CONSTANTS = (0.7643, 0.8649, 0.3230, 1.4187, -0.1463, 0.4168)
MANUAL = (-0.109 + 6.41j, -0.204)
REGULATED = (0.504 + 7.23j, -20.202, -31.230)
STABILIZED = (-1.005 + 6.607j, -39.097, -0.739, -19.797 + 12.822j)


TRANSDUCER = 0.02  # s


def _machine(t, x, u, p):
    field = field_circuit()
    rates = field.A @ x[:3] + np.multiply.outer(field.drive, u[0])
    voltage = np.tensordot(field.seen, x[:3], 1)
    return np.concatenate([rates, [(voltage - x[3]) / TRANSDUCER]])


machine = Plant(
    states={"slip": "pu", "angle": "rad", "flux": "pu", "measured_voltage": "pu"},
    inputs={"field_voltage": "pu"},
    dynamics=_machine,
    nominal={"slip": 0.01, "angle": 0.2, "flux": 0.1, "measured_voltage": 0.1, "field_voltage": 1.0},
)
