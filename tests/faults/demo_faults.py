"""Faults of the demo's loops as replaced texts of its files, beside the loop that then is, by hand."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

from .demo_loops import (
    DEMO,
    Current,
    Delivered,
    Product,
    Rail,
    Stepped,
    Water,
    from_json,
    from_table,
    ride,
    scheduled,
)

Made = Stepped | Water | Product | Current | Rail
Edits = Sequence[tuple[str, str, str]]  # file, text, what stands in its place


@dataclass(frozen=True)
class Fault:
    """A demo with a fault. made: the loop as it then is; lost: limits that it breaks, empty where it is unstable."""

    demo: str
    loop: str
    point: str
    edits: Edits
    made: Made
    lost: tuple[str, ...] = ()


AUTO, CONTROL, REGULATOR, GAINS = "autopilot.yaml", "control.yaml", "regulator.yaml", "gains.csv"
KN24 = from_json(DEMO / "foil_ferry" / "models" / "kn24.json")
KN34 = from_json(DEMO / "foil_ferry" / "models" / "cruise-34kn.json")
SLOW = from_table(DEMO / "juice_pasteurizer" / "models.csv", "slow")
DRAINED = from_json(DEMO / "buoy_converter" / "models" / "drained.json")
AT_24, AT_34 = ride(KN24, **scheduled(24.0)), ride(KN34, **scheduled(34.0))
WATER, PRODUCT = Water(SLOW), Product(SLOW)
CURRENT = Current(DRAINED)
RAIL = Rail(DRAINED, CURRENT)
ROW_34, ROW_26, ROW_20 = "34,24,9,10", "26,30,10,14", "20,36,12,16"


def ferry(point: str, edits: Edits, made: Stepped, *lost: str) -> Fault:
    return Fault("foil_ferry", "ride", point, edits, made, lost)


def juice(loop: str, edits: Edits, made: Made, *lost: str) -> Fault:
    return Fault("juice_pasteurizer", loop, "slow", [(CONTROL, old, new) for old, new in edits], made, lost)


def buoy(loop: str, edits: Edits, made: Made, *lost: str) -> Fault:
    return Fault("buoy_converter", loop, "drained", [(REGULATOR, old, new) for old, new in edits], made, lost)


def times(loop: Stepped, factor: float) -> Stepped:
    return replace(loop, kp=factor * loop.kp, ki=factor * loop.ki, kd=factor * loop.kd)


def columns(unit: str, line: str = "[deg/m],ki [deg/m/s],kd [deg*s/m]") -> tuple[str, str, str]:
    return GAINS, line, line.replace("deg", unit)


def delayed(text: str) -> tuple[str, str, str]:
    return AUTO, "delay: 20 ms", f"delay: {text}"


KD = (AUTO, "        kd: {table: gains.csv, over: speed, column: kd}\n        filter: 50 ms\n", "")
FLAP, VALVE = "fore_flap: {lag: 60 ms", "\nactuators:\n  steam_valve: {lag: 30 s}\n\nloops:\n"
PI = "{kp: 0.6, ki: 1.8 1/min}"
RAIL_PI = "{kp: 0.3 A/V, ki: 300 A/V/s}"
COIL = "    sample: 20 us\n    delay: 10 us"

FAULTS = {
    # sampled, scheduled, behind an actuator, with dead time
    "ride, gain doubled": ferry("kn24", [(GAINS, ROW_20, "20,72,24,32"), (GAINS, ROW_26, "26,60,20,28")],
                                times(AT_24, 2.0), "crossover"),
    "ride, gain three times": ferry("cruise-34kn", [(GAINS, ROW_34, "34,72,27,30")], times(AT_34, 3.0),
                                    "gain margin (upwards)", "phase margin", "delay margin", "disk margin",
                                    "sensitivity peak", "crossover", "overshoot"),
    "ride, gain eight times": ferry("cruise-34kn", [(GAINS, ROW_34, "34,192,72,80")], times(AT_34, 8.0)),
    "ride, 300 ms of dead time": ferry("cruise-34kn", [delayed("300 ms")], replace(AT_34, delay=0.3),
                                       "gain margin (upwards)", "phase margin", "delay margin", "disk margin",
                                       "sensitivity peak", "overshoot"),
    "ride, 95 ms of dead time": ferry("cruise-34kn", [delayed("95 ms")], replace(AT_34, delay=0.095),
                                      "phase margin"),
    "ride, 600 ms of dead time": ferry("cruise-34kn", [delayed("600 ms")], replace(AT_34, delay=0.6)),
    "ride, no derivative gain": ferry("cruise-34kn", [KD], replace(AT_34, kd=0.0), "gain margin (downwards)",
                                      "phase margin", "delay margin", "disk margin", "sensitivity peak", "overshoot"),
    "ride, sign flipped": ferry("kn24", [(GAINS, ROW_20, "20,-36,-12,-16"), (GAINS, ROW_26, "26,-30,-10,-14")],
                                times(AT_24, -1.0)),
    "ride, sample time 400 ms": ferry("cruise-34kn", [(AUTO, "sample: 20 ms", "sample: 400 ms")],
                                      replace(AT_34, sample=0.4), "gain margin (upwards)", "phase margin",
                                      "disk margin", "sensitivity peak", "overshoot"),
    "ride, gains of 20 kn at 34 kn": ferry("cruise-34kn", [(GAINS, ROW_34, "34,36,12,16")],
                                           ride(KN34, **scheduled(20.0)), "crossover"),
    "ride, actuator ten times slower": ferry("kn24", [(AUTO, FLAP, "fore_flap: {lag: 600 ms")],
                                             ride(KN24, **scheduled(24.0), lag=0.6),
                                             "phase margin", "disk margin", "sensitivity peak", "overshoot"),
    "ride, gains in rad": ferry("kn24", [columns("rad")], times(AT_24, 180.0 / math.pi)),
    "ride, derivative gain in rad": ferry("kn24", [columns("rad", "kd [deg*s/m]")],
                                          replace(AT_24, kd=AT_24.kd * 180.0 / math.pi)),
    # a cascade with dead time
    "water, sign flipped": juice("water", [("gain: [[0.1]]", "gain: [[-0.1]]")], replace(WATER, gain=-0.1)),
    "water, sixty times, slow valve": juice("water", [("gain: [[0.1]]", "gain: [[6]]"), ("\nloops:\n", VALVE)],
                                            replace(WATER, gain=6.0, lag=30.0), "phase margin"),
    "product, gain doubled": juice("product", [(PI, "{kp: 1.2, ki: 3.6 1/min}")], replace(PRODUCT, kp=1.2, ki=0.06),
                                   "gain margin (upwards)", "phase margin"),
    "product, gain three times": juice("product", [(PI, "{kp: 1.8, ki: 5.4 1/min}")],
                                       replace(PRODUCT, kp=1.8, ki=0.09)),
    "product, dead time doubled": juice("product", [("delay: 5 s", "delay: 10 s")], replace(PRODUCT, delay=10.0),
                                        "phase margin"),
    "product, dead time a minute": juice("product", [("delay: 5 s", "delay: 1 min")], replace(PRODUCT, delay=60.0)),
    "product, no proportional gain": juice("product", [(PI, "{ki: 1.8 1/min}")], replace(PRODUCT, kp=0.0),
                                           "gain margin (upwards)", "phase margin"),
    "product, sign flipped": juice("product", [(PI, "{kp: -0.6, ki: -1.8 1/min}")],
                                   replace(PRODUCT, kp=-0.6, ki=-0.03)),
    "product, inner sign flipped": juice("product", [("gain: [[0.1]]", "gain: [[-0.1]]")],
                                         replace(PRODUCT, gain=-0.1)),
    "product, inner loop hardly closed": juice("product", [("gain: [[0.1]]", "gain: [[0.01]]")],
                                               replace(PRODUCT, gain=0.01), "phase margin"),
    "product, sampled every 20 s": juice("product", [("delay: 5 s", "delay: 5 s\n    sample: 20 s")],
                                         PRODUCT.sampled(20.0), "phase margin"),
    "product, sampled every 40 s": juice("product", [("delay: 5 s", "delay: 5 s\n    sample: 40 s")],
                                         PRODUCT.sampled(40.0), "gain margin (upwards)", "phase margin"),
    "product, per second for per minute": juice("product", [("ki: 1.8 1/min", "ki: 1.8 1/s")],
                                                replace(PRODUCT, ki=1.8)),
    "product, valve with a lag of 30 s": juice("product", [("\nloops:\n", VALVE)], replace(PRODUCT, lag=30.0),
                                               "gain margin (upwards)", "phase margin", "settling to 5 %"),
    # two sampled loops
    "current, gain seven times": buoy("current", [("0.02 1/A", "0.14 1/A")], replace(CURRENT, gain=0.14),
                                      "phase margin", "sensitivity peak"),
    "current, gain twenty times": buoy("current", [("0.02 1/A", "0.4 1/A")], replace(CURRENT, gain=0.4)),
    "current, ten times the dead time": buoy("current", [("delay: 10 us", "delay: 100 us")],
                                             replace(CURRENT, delay=100e-6),
                                             "gain margin (upwards)", "sensitivity peak"),
    "current, 250 us of dead time": buoy("current", [("delay: 10 us", "delay: 250 us")],
                                         replace(CURRENT, delay=250e-6)),
    "current, sample time doubled three times": buoy("current", [(COIL, COIL.replace("20 us", "160 us"))],
                                                     replace(CURRENT, sample=160e-6),
                                                     "gain margin (upwards)", "sensitivity peak"),
    "current, sample time doubled four times": buoy("current", [(COIL, COIL.replace("20 us", "320 us"))],
                                                    replace(CURRENT, sample=320e-6)),
    "current, sign flipped": buoy("current", [("0.02 1/A", "-0.02 1/A")], replace(CURRENT, gain=-0.02)),
    "current, per mA for per A": buoy("current", [("0.02 1/A", "0.02 1/mA")], replace(CURRENT, gain=20.0)),
    "rail, gain ten times": buoy("rail", [(RAIL_PI, "{kp: 3 A/V, ki: 3000 A/V/s}")],
                                 replace(RAIL, kp=3.0, ki=3e3), "crossover"),
    "rail, gain a hundred times": buoy("rail", [(RAIL_PI, "{kp: 30 A/V, ki: 30000 A/V/s}")],
                                       replace(RAIL, kp=30.0, ki=3e4)),
    "rail, integral gain ten times": buoy("rail", [("300 A/V/s", "3000 A/V/s")], replace(RAIL, ki=3e3),
                                          "phase margin", "disk margin", "crossover"),
    "rail, sign flipped": buoy("rail", [(RAIL_PI, "{kp: -0.3 A/V, ki: -300 A/V/s}")],
                               replace(RAIL, kp=-0.3, ki=-300.0)),
    "rail, every hundredth sample, integral gain ten times": buoy(
        "rail", [("20 us\n    require: {rule", "2 ms\n    require: {rule"), ("300 A/V/s", "3 A/V/ms")],
        replace(RAIL, times=100, ki=3e3)),
    "rail, per ms for per s": buoy("rail", [("300 A/V/s", "300 A/V/ms")], replace(RAIL, ki=3e5)),
    "rail, inner gain of another coil": buoy("rail", [("0.02 1/A", "0.002 1/A")],
                                             replace(RAIL, current=replace(CURRENT, gain=0.002)), "crossover"),
    "rail, inner loop unstable": buoy("rail", [("0.02 1/A", "0.4 1/A")],
                                      replace(RAIL, current=replace(CURRENT, gain=0.4))),
}  # fmt: skip


def with_entry(model: Delivered, row: str, column: str, value: float) -> Delivered:
    """With one entry of A changed."""
    A = model.A.copy()
    A[model.states.index(row), model.states.index(column)] = value
    return replace(model, A=A)


KN24_FILE, PITCH = "models/kn24.json", -4.0  # instead of -13.5 1/s
FAULTS |= {
    "ride, pitch hardly damped": Fault(
        "foil_ferry", "ride", "kn24", [(KN24_FILE, "-13.5294", str(PITCH))],
        ride(with_entry(KN24, "pitch_rate", "pitch_rate", PITCH), **scheduled(24.0)),
        ("phase margin", "delay margin", "disk margin", "sensitivity peak", "overshoot"),
    ),
}  # fmt: skip

RIGHT = {
    "ride, kn24": Fault("foil_ferry", "ride", "kn24", (), AT_24),
    "ride, cruise-34kn": Fault("foil_ferry", "ride", "cruise-34kn", (), AT_34),
    "water": juice("water", (), WATER),
    "product": juice("product", (), PRODUCT),
    "current": buoy("current", (), CURRENT),
    "rail": buoy("rail", (), RAIL),
}
