"""The words of `modes` and `actuators`."""

from __future__ import annotations

from .grammar import SIGNAL, Kind, Row, each

_TIME = "time"

MODE_LIMITS = (
    Row("damping", Kind.BOUNDS, "damping ratio"),
    Row("natural_frequency", Kind.BOUNDS, "distance of the pole from the origin, in rad/s or Hz",
        dimension="frequency", sign="+"),
    Row("decay_rate", Kind.BOUNDS, "-Re, that is damping times natural frequency", dimension="1/time"),
    Row("time_constant", Kind.BOUNDS, "1 over the decay rate", dimension=_TIME, sign="+"),
    Row("time_to_half", Kind.BOUNDS, "time in which a stable mode halves", dimension=_TIME, sign="+"),
    Row("time_to_double", Kind.BOUNDS, "time in which an unstable mode doubles", dimension=_TIME, sign="+"),
    Row("period", Kind.BOUNDS, "of the oscillation", dimension=_TIME, sign="+"),
)  # fmt: skip

EXCEPT_WORDS = (
    Row("at_zero", Kind.NAMES, "states with a pole at the origin: as many poles are excused as are named"),
    Row("time_to_double", Kind.BOUNDS, "{min: T}: unstable modes that double no faster are excused", dimension=_TIME,
        sign="+"),
)  # fmt: skip

ZERO_LIMITS = (
    Row("real", Kind.BOUNDS, "real part", dimension="1/time"),
    Row("damping", Kind.BOUNDS, "damping ratio"),
    Row("natural_frequency", Kind.BOUNDS, "distance of the zero from the origin, in rad/s or Hz",
        dimension="frequency", sign="+"),
)  # fmt: skip

GAIN_LIMITS = (
    Row("from", Kind.NAME, "the input", required=True),
    Row("to", Kind.NAME, "the output or state", required=True),
    Row("is", Kind.EXPECT, "the gain, in the output's unit over the input's", dimension="of a gain"),
    Row("min", Kind.QUANTITY, "lower limit", dimension="of a gain"),
    Row("max", Kind.QUANTITY, "upper limit", dimension="of a gain"),
)

MODE_WORDS = (
    Row("name", Kind.NAME, "of the line, for reports"),
    Row("between", Kind.RANGE, "modes whose natural frequency lies here, in rad/s or Hz", dimension="frequency"),
    Row("participates", Kind.NAMED, "modes in which a state has at least this share", each(Kind.FRACTION, sign="+")),
    Row("near", Kind.LOCATION, "modes near a place of the complex plane", dimension="frequency"),
    Row("within", Kind.FRACTION, "how near, of the distance from the origin", sign="+"),
    Row("may_be_empty", Kind.TRUTH, "no mode has to be chosen", default="false"),
    Row("stable", Kind.TRUTH, "every chosen mode is stable"),
    Row("except", Kind.BLOCK, "what `stable` excuses", EXCEPT_WORDS),
    *MODE_LIMITS,
    Row("rule", Kind.NAME, "ready-made limits on the chosen modes"),
    Row("controllable_from", Kind.NAMED, "least scaled measure of control over every chosen mode, by input",
        each(Kind.FRACTION, sign="+")),
    Row("observable_from", Kind.NAMED, "least scaled measure of its being seen, by output or state",
        each(Kind.FRACTION, sign="+")),
    Row("minimum_phase", Kind.TRUTH, "no zero right of the axis"),
    Row("zeros", Kind.BLOCK, "limits on the zeros", ZERO_LIMITS),
    Row("inputs", Kind.NAMES, "from which zeros are taken; default: all"),
    Row("outputs", Kind.NAMES, "to which zeros are taken; default: all"),
    Row("static_gain", Kind.GROUPS, "the gain at rest", GAIN_LIMITS),
)  # fmt: skip

ACTUATOR_WORDS = (
    Row("lag", Kind.QUANTITY, "time constant of a first-order lag, in both models", dimension=_TIME, sign="0+"),
    Row("rate", Kind.QUANTITY, "largest change per time, of the plant only", dimension="the signal's per time",
        sign="+"),
    Row("range", Kind.RANGE, "where the input stays, of the plant only", dimension=SIGNAL),
)  # fmt: skip
