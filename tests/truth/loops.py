"""Linear plants whose loops have published margins, and what is published of them.

Each is written in phase-variable form x1' = x2, ..., with one input and one output; the controllers stand in the specs.
Next to each figure: printed (seen in a public transcription), from memory, or derived by an independent script.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from linverify.core.plant import Plant


def of(num: Sequence[float], den: Sequence[float]) -> Plant:
    """num/den in s, highest power first, strictly proper: states x1, x2, ...; input u, output y."""
    n = len(den) - 1
    lead = float(den[0])
    low = -np.array(den[:0:-1], dtype=float) / lead
    seen = np.zeros(n)
    seen[: len(num)] = np.array(num[::-1], dtype=float) / lead

    def dynamics(t, x, u, p):
        return np.concatenate([x[1:], [np.tensordot(low, x, 1) + u[0]]])

    def measurement(t, x, u, p):
        return np.stack([np.tensordot(seen, x, 1)])

    return Plant(
        states={f"x{i + 1}": "" for i in range(n)},
        inputs={"u": ""},
        outputs={"y": ""},
        dynamics=dynamics,
        measurement=measurement,
    )


def product(*factors: Sequence[float]) -> list[float]:
    out = np.ones(1)
    for factor in factors:
        out = np.polymul(out, factor)
    return [float(each) for each in out]


# S. Skogestad, I. Postlethwaite, Multivariable Feedback Control, ch. 2; plants printed, margins from memory
inverse_response = of([-6.0, 3.0], product([10.0, 1.0], [5.0, 1.0]))
unstable = of([4.0], product([1.0, -1.0], [0.02, 1.0], [0.02, 1.0]))
# P. Seiler, A. Packard, P. Gahinet, "An introduction to disk margins", IEEE Control Systems Magazine 40(5), 2020,
# example 1 (plant with controller 25): margins printed
three_lags = of([1.0], [1.0, 10.0, 10.0, 10.0])
# K. J. Astrom, R. M. Murray, Feedback Systems: 3/(s + 1)^3, margins from memory; Ms = 11/5 at sqrt(1.75) derived
cube = of([1.0], [1.0, 3.0, 3.0, 1.0])
# the same example file as `three_lags`: a loop whose gain crosses one three times, printed
several_crossings = of([35.0, 3.5, 8.75], product([100.0, 1.0], [1.0, 0.22, 1.0], [0.01, 0.008, 1.0]))


def _rotating(t, x, u, p):
    a = p["coupling"]
    return np.stack([a * x[1] + u[0], -a * x[0] + u[1]])


def _seen(t, x, u, p):
    a = p["coupling"]
    return np.stack([x[0] + a * x[1], -a * x[0] + x[1]])


# a spinning body, S. Skogestad, I. Postlethwaite, section 3.7.1 (origin J. C. Doyle): one loop at a time the gain
# margin is infinite and the phase margin 90 deg, from memory; both at once are lost for gains 1 +- 1/sqrt(a^2 + 1)
rotating = Plant(
    states={"wx": "rad/s", "wy": "rad/s"},
    inputs={"tx": "rad/s^2", "ty": "rad/s^2"},
    outputs={"zx": "rad/s", "zy": "rad/s"},
    parameters={"coupling": (10.0, "rad/s")},
    dynamics=_rotating,
    measurement=_seen,
)


@dataclass(frozen=True)
class Answer:
    """What is known of a loop: (value, allowed difference), absolute; ratios, deg, plant's time unit, rad/s."""

    gain_up: tuple[float, float] | None = None
    gain_down: tuple[float, float] | None = None
    phase: tuple[float, float] | None = None
    delay: tuple[float, float] | None = None
    sensitivity_peak: tuple[float, float] | None = None
    complementary_peak: tuple[float, float] | None = None
    disk: tuple[float, float] | None = None
    crossover: tuple[float, float] | None = None


# spec and loop in tests/published/specs/loops_*.yaml -> printed or remembered digits, and derived ones
PUBLISHED: dict[tuple[str, str], Answer] = {
    # from memory: GM 1.63, PM 19.4 deg, Ms 3.92, Mt 3.35, delay margin 1.44 s, 0.236 rad/s; the book rounds Kc
    ("loops_inverse_response", "pi"): Answer(
        gain_up=(1.63, 0.006), phase=(19.4, 0.05), sensitivity_peak=(3.92, 0.0196), complementary_peak=(3.35, 0.0168),
        delay=(1.44, 0.005), crossover=(0.236, 5e-4),
    ),
    # from memory: upper GM 18.7, lower GM 0.21, PM 59.5 deg, Ms 1.19, Mt 1.38
    ("loops_unstable", "pi"): Answer(
        gain_up=(18.7, 0.05), gain_down=(0.21, 0.005), phase=(59.5, 0.05), sensitivity_peak=(1.19, 0.005),
        complementary_peak=(1.38, 0.005),
    ),
    # printed: GM 3.6, PM 29.1 deg, disk margin 0.46
    ("loops_three_lags", "gain"): Answer(gain_up=(3.6, 0.05), phase=(29.1, 0.05), disk=(0.46, 0.005)),
    # from memory: GM 2.67, PM 41.7 deg
    ("loops_cube", "gain"): Answer(gain_up=(2.67, 0.005), phase=(41.7, 0.05)),
    # printed: GM 2.2716, smallest |1 + L| 0.5591; of three phase margins 97.5941, -157.7844, 134.7359 the smallest
    ("loops_several_crossings", "direct"): Answer(
        gain_up=(2.2716, 5e-5), sensitivity_peak=(1 / 0.5591, 2e-4), phase=(97.5941, 2e-4),
    ),
}  # fmt: skip
DERIVED: dict[tuple[str, str], Answer] = {
    ("loops_inverse_response", "pi"): Answer(
        gain_up=(1.6355, 5e-5), phase=(19.442, 5e-4), sensitivity_peak=(3.9116, 5e-5),
        complementary_peak=(3.3423, 5e-5), delay=(1.4356, 5e-5), crossover=(0.236366, 5e-7),
    ),
    ("loops_unstable", "pi"): Answer(
        gain_up=(18.6796, 5e-5), gain_down=(0.205657, 5e-7), phase=(59.519, 5e-4), sensitivity_peak=(1.19421, 5e-6),
        complementary_peak=(1.37726, 5e-6), delay=(0.212125, 5e-7), crossover=(4.897115, 5e-7),
    ),
    ("loops_three_lags", "gain"): Answer(
        gain_up=(3.6, 1e-9), phase=(29.1104, 5e-5), delay=(0.284724, 5e-7), disk=(0.458093, 5e-7),
        crossover=(1.784436, 5e-7),
    ),
    ("loops_cube", "gain"): Answer(
        gain_up=(8 / 3, 1e-9), phase=(41.6903, 5e-5), sensitivity_peak=(2.2, 1e-7), crossover=(1.039271, 5e-7),
    ),
    ("loops_several_crossings", "direct"): Answer(
        gain_up=(2.271586, 5e-7), sensitivity_peak=(1 / 0.559085, 2e-6), phase=(97.59398, 5e-6),
    ),
}  # fmt: skip
CROSSINGS = ((0.0850, 97.59398), (0.9373, -157.78448), (1.0919, 134.73257))  # rad/s, deg: printed to 4 digits; derived
