"""One machine on an infinite bus, classical and with its field circuit, in per unit and seconds.

P. Kundur, Power System Stability and Control, McGraw-Hill 1994, examples 12.2 and 12.3. Data of 12.3 seen in a public
transcription; published results are values from memory.
"""

from __future__ import annotations

import cmath
import math

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


def with_field() -> np.ndarray:
    """A (3, 3) of speed, angle and field flux in manual excitation, by the formulas of section 12.3."""
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
    eq = (TERMINAL * frame).real
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
    return np.array([[0.0, -K1 / (2 * H), -K2 / (2 * H)], [W0, 0.0, 0.0], [0.0, a32, a33]])
