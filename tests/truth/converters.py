"""Averaged DC-DC converters in continuous conduction, without losses.

R. W. Erickson, D. Maksimovic, Fundamentals of Power Electronics, chapter 8, worked example D = 0.6, R = 10 Ohm,
Vg = 30 V, L = 160 uH, C = 160 uF. Values from memory; all formulas derived anew from the averaged equations.
"""

from __future__ import annotations

import numpy as np

from linverify.core.plant import Plant

L, C, R, VG, D = 160e-6, 160e-6, 10.0, 30.0, 0.6


def _buck(t, x, u, p):
    (i, v), (d, vg) = x, u
    return np.stack([(d * vg - v) / L, (i - v / p["load"]) / C])


def _boost(t, x, u, p):
    (i, v), (d, vg) = x, u
    return np.stack([(vg - (1 - d) * v) / L, ((1 - d) * i - v / p["load"]) / C])


def _buck_boost(t, x, u, p):
    (i, v), (d, vg) = x, u
    return np.stack([(d * vg + (1 - d) * v) / L, (-(1 - d) * i - v / p["load"]) / C])


def _converter(dynamics) -> Plant:
    return Plant(
        states={"current": "A", "voltage": "V"},
        inputs={"duty": "", "supply": "V"},
        outputs={"voltage": "V"},
        parameters={"load": (R, "ohm")},
        dynamics=dynamics,
    )


buck, boost, buck_boost = _converter(_buck), _converter(_boost), _converter(_buck_boost)
