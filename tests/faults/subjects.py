"""Plants, operating points and drives of the fault bench: demo plants and published plants, on short horizons.

A subject is a bound spec with one small set of drives and no bands yet: how wide the bands are is drawn for each case.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from functools import cache
from pathlib import Path

from linverify.core.case import Amplitude, Case, DriveSet
from linverify.core.delivered import Keep
from linverify.core.errors import Place
from linverify.spec.bind import load

ROOT = Path(__file__).parent.parent.parent
PLACE = Place("tests/faults", 1, 1)
COUNT, SEARCH = 40, 20


@dataclass(frozen=True)
class Row:
    """One line of the table: where the plant is trimmed, what moves it, what is compared, and what can go wrong.

    neighbour: holds of another operating point; amplitude, offsets: deviations about trim in plant units;
    drifting: parameters that a model can be stale in; angles: signals that a model may have in degrees; bend: the state
    whose rate gets a corner at the operating point as this state moves; keep, others: of a reduced model.
    """

    spec: str
    point: str
    neighbour: Mapping[str, float]
    every: float
    intervals: int
    amplitude: Mapping[str, float]
    signals: tuple[str, ...]
    drifting: tuple[str, ...]
    bend: tuple[str, str]
    angles: tuple[str, ...] = ()
    offsets: Mapping[str, float] = field(default_factory=dict)
    rate: Mapping[str, float] = field(default_factory=dict)
    course: str = "held"
    keep: tuple[str, ...] = ()
    others: str = "freeze"


PUBLISHED = "tests/published/specs"
FERRY = "specs/foil_ferry/ride.yaml"
TABLE: dict[str, Row] = {
    "ferry": Row(
        FERRY, "kn24", {"speed": 15.43}, 0.25, 8, {"fore_flap": 0.01, "aft_flap": 0.01},
        ("ride_height", "pitch"), ("mass", "pitch_inertia", "water_density"), ("pitch_rate", "pitch"),
        angles=("pitch", "fore_flap"), offsets={"pitch": 0.002},
        keep=("heave_rate", "pitch_rate", "pitch", "ride_height"),
    ),
    "ferry straight": Row(
        FERRY, "cruise-30kn", {"speed": 17.49}, 0.3, 8, {"fore_flap": 0.01, "thrust": 2000.0},
        ("speed", "bow_height"), ("mass", "water_density"), ("heave_rate", "heave_rate"),
        angles=("pitch", "pitch_rate"), course="straight", rate={"thrust": 4000.0},
    ),
    "rail": Row(
        "specs/buoy_converter/rail.yaml", "full", {"battery": 11.2}, 1e-4, 14, {"duty": 0.01, "load": 0.2},
        ("rail", "coil_current"), ("inductance", "capacitance", "capacitor_resistance"),
        ("coil_current", "coil_current"),
    ),
    "pasteurizer": Row(
        "specs/juice_pasteurizer/holding.yaml", "usual", {"juice_flow": 1.3}, 4.0, 8,
        {"steam_valve": 0.04, "juice_flow": 0.05}, ("holding_entry", "water_loop"), ("fouling", "room"),
        ("water", "water"), rate={"juice_flow": 0.01},
        keep=("water", "juice_1", "juice_2", "cell_1", "cell_2", "cell_3", "cell_4"),
        others="settle",
    ),
    "tanks, minimum phase": Row(
        f"{PUBLISHED}/tanks_minus.yaml", "published", {"v1": 3.3}, 12.0, 12, {"v1": 0.3, "v2": 0.3},
        ("y1", "y2"), ("gamma1", "gamma2", "k1", "k2"), ("h1", "h1"), offsets={"h3": 0.1},
    ),
    "tanks, non-minimum phase": Row(
        f"{PUBLISHED}/tanks_plus.yaml", "published", {"v2": 2.7}, 12.0, 12, {"v1": 0.3, "v2": 0.3},
        ("y1", "y2"), ("gamma1", "k2"), ("h2", "h2"), rate={"v1": 0.01},
    ),
    "reactor": Row(
        f"{PUBLISHED}/van_de_vusse.yaml", "published", {"dilution": 0.7}, 0.2, 12, {"dilution": 0.05},
        ("ca", "cb"), ("k2",), ("cb", "cb"), offsets={"ca": 0.05},
    ),
    "buck": Row(
        f"{PUBLISHED}/buck.yaml", "published", {"supply": 33.0}, 1e-4, 12, {"duty": 0.008, "supply": 0.2},
        ("voltage", "current"), ("load",), ("voltage", "voltage"),
    ),
    "boost": Row(
        f"{PUBLISHED}/boost.yaml", "published", {"duty": 0.55}, 1e-4, 12, {"duty": 0.01, "supply": 0.5},
        ("voltage", "current"), ("load",), ("current", "current"),
    ),
    "buck-boost": Row(
        f"{PUBLISHED}/buck_boost.yaml", "published", {"duty": 0.55}, 1e-4, 12, {"duty": 0.01, "supply": 0.5},
        ("voltage",), ("load",), ("current", "voltage"),
    ),
    "pendulum": Row(
        f"{PUBLISHED}/pendulum.yaml", "aside", {"angle": 0.5}, 0.1, 14, {"torque": 0.1},
        ("angle", "rate"), ("mass",), ("rate", "rate"), angles=("angle", "rate"), offsets={"angle": 0.02},
    ),
    "pendulum upright": Row(
        f"{PUBLISHED}/pendulum.yaml", "upright", {"torque": 0.4}, 0.06, 8, {"torque": 0.05},
        ("angle",), ("mass",), ("rate", "angle"), angles=("angle",),
    ),
    "cart": Row(
        f"{PUBLISHED}/cart.yaml", "upright", {"position": 1.0}, 0.1, 8, {"force": 10.0},
        ("position", "angle"), ("bob",), ("speed", "angle"), angles=("angle", "rate"), offsets={"angle": 0.01},
    ),
    "ball": Row(
        f"{PUBLISHED}/ball.yaml", "cm1", {"gap": 0.011}, 0.005, 8, {"current": 0.005},
        ("gap",), ("coil",), ("speed", "gap"),
    ),
    "car": Row(
        f"{PUBLISHED}/car_understeering.yaml", "characteristic", {"speed": 35.0}, 0.1, 12,
        {"steer": 0.005, "speed": 1.0}, ("yaw_rate", "side_speed"), ("front", "rear"), ("yaw_rate", "yaw_rate"),
        angles=("yaw_rate", "steer"), rate={"steer": 0.03},
    ),
    "ship": Row(
        f"{PUBLISHED}/mariner.yaml", "straight", {"yaw_rate": 0.004}, 5.0, 12, {"rudder": 0.03},
        ("yaw_rate", "sway"), ("sway_damping",), ("yaw_rate", "yaw_rate"), angles=("yaw_rate", "rudder"),
        keep=("sway", "yaw_rate"),
    ),
    "copter": Row(
        f"{PUBLISHED}/quadcopter.yaml", "hover", {"psi": 0.3}, 0.06, 8, {"w1": 4.0, "w3": 4.0},
        ("pz", "theta"), ("thrust",), ("q", "theta"), angles=("theta", "q"),
        keep=("px", "pz", "vx", "vz", "theta", "q"),
    ),
}  # fmt: skip


@dataclass(frozen=True)
class Subject:
    """A row of the table with its bound spec; the case has one set of drives and no bands."""

    name: str
    row: Row
    case: Case

    @property
    def drives(self) -> DriveSet:
        return self.case.drives[0]

    @property
    def keep(self) -> Keep:
        """What a reduced model of this subject keeps."""
        plant, others = self.case.plant, self.row.others
        outputs = tuple(plant.states if plant.outputs is None else plant.outputs)
        return Keep(self.row.keep, tuple(plant.inputs), outputs, "settle" if others == "settle" else "freeze", PLACE)


@cache
def _cases(spec: str) -> dict[str, Case]:
    return {case.point: case for case in load(ROOT / spec, ROOT)}


@cache
def subject(name: str) -> Subject:
    """The subject of a row, by its name. Raises KeyError."""
    row = TABLE[name]
    drives = DriveSet(
        "", row.every, row.intervals, {key: Amplitude(-size, size) for key, size in row.amplitude.items()},
        course="straight" if row.course == "straight" else "held", rate=row.rate, offsets=row.offsets,
        count=COUNT, search=SEARCH, place=PLACE,
    )  # fmt: skip
    case = _cases(row.spec)[row.point]
    # what leaves the envelope is no matter of this bench: amplitudes are small enough to stay inside
    return Subject(name, row, replace(case, drives=(drives,), bands=(), rate_limits={}, checks=(), requirements=()))
