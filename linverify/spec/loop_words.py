"""The words of `loops` as data: controllers, how they are closed, and what a loop must keep."""

from __future__ import annotations

from dataclasses import replace

from .grammar import Kind, Row, each

SCHEDULE_WORDS = (
    Row("table", Kind.TEXT, "a CSV file: a line of names with units, then one row a value", required=True),
    Row("over", Kind.TEXT, "the signal or parameter that the table is scheduled over", required=True),
    Row("column", Kind.TEXT, "the column that is meant, where there are several"),
)

PID_WORDS = (
    Row("kp", Kind.GAIN, "gain of the error", dimension="what it moves per what it measures"),
    Row("ki", Kind.GAIN, "gain of the error's integral", dimension="what it moves per what it measures and time"),
    Row("kd", Kind.GAIN, "gain of the error's filtered derivative",
        dimension="what it moves times time per what it measures"),
    Row("filter", Kind.GAIN, "time constant of the derivative's filter", dimension="time", sign="+"),
)  # fmt: skip

CONTROLLER_WORDS = (
    Row("pid", Kind.BLOCK, "kp e + ki integral e + kd s/(filter s + 1) e", PID_WORDS),
    Row("num", Kind.COEFFICIENTS, "numerator, highest power first; in z with `sample`"),
    Row("den", Kind.COEFFICIENTS, "denominator, highest power first"),
    Row("A", Kind.MATRIX, "x' = A x + B e; the next state with `sample`"),
    Row("B", Kind.MATRIX, "one column for each measured signal"),
    Row("C", Kind.MATRIX, "v = C x + D e; one row for each signal moved"),
    Row("D", Kind.MATRIX, "direct gains; left out: zero"),
    Row("gain", Kind.MATRIX, "static gains: a row for each signal moved, a column for each measured"),
    Row("file", Kind.FILE, "a file with A, B, C, D, dt, inputs, outputs, units"),
    Row("object", Kind.PLANT, "a Python object with A, B, C, D, or a function of the operating point's values"),
)

SETTLING_WORDS = (
    Row("time", Kind.QUANTITY, "time after which the response stays in the band", dimension="time", required=True,
        sign="+"),
    Row("within", Kind.FRACTION, "the band, of the final value", default="2 %", sign="+"),
)  # fmt: skip

REQUIRE_WORDS = (
    Row("gain_margin", Kind.QUANTITY, "least, upwards and downwards", dimension="a ratio or dB"),
    Row("phase_margin", Kind.QUANTITY, "least, both ways", dimension="angle"),
    Row("delay_margin", Kind.QUANTITY, "least, beyond the delay that is declared", dimension="time", sign="+"),
    Row("disk_margin", Kind.NUMBER, "least disk margin, skew 0: 0.4 covers 3.5 dB and 22.6 deg", sign="+"),
    Row("sensitivity_peak", Kind.QUANTITY, "largest |S|, or singular value of S", dimension="a ratio or dB"),
    Row("complementary_peak", Kind.QUANTITY, "largest |T|, or singular value of T", dimension="a ratio or dB"),
    Row("crossover", Kind.RANGE, "where |L| = 1 may be, in rad/s or Hz", dimension="frequency"),
    Row("damping", Kind.BOUNDS, "damping ratio of the poles that the loop moves"),
    Row("overshoot", Kind.FRACTION, "largest, of a step of the set point; may pass 100 %", sign="+", most=10),
    Row("settling", Kind.SETTLING, "of a step of the set point", dimension="time"),
    Row("rule", Kind.RULES, "ready-made limits, by name"),
)

LOOP_WORDS = (
    Row("controller", Kind.BLOCK, "takes set point minus measurement: u = K (set point - y)", CONTROLLER_WORDS,
        required=True),
    Row("measures", Kind.NAMES, "outputs or states, in the order of the controller's inputs", required=True),
    Row("moves", Kind.NAMES, "plant inputs, or LOOP.set_point.NAME of a loop in `with`, in the order of its outputs; "
        "what several loops give to one input adds up", required=True),
    Row("with", Kind.NAMES, "loops that are closed inside this one"),
    Row("sample", Kind.QUANTITY, "sample time of a controller with a hold; left out: continuous", dimension="time",
        sign="+"),
    Row("delay", Kind.QUANTITY, "dead time once around the loop", dimension="time", default="0 s", sign="0+"),
    Row("leaves", Kind.NAMES, "states whose modes this loop does not move and need not stabilize"),
    Row("break", Kind.CHOICE, "where margins are taken", default="plant_input",
        choices=("plant_input", "plant_output")),
    Row("require", Kind.BLOCK, "what the loop must keep", REQUIRE_WORDS),
    Row("confirm", Kind.CHOICE, "repeat the margin on the nonlinear plant", choices=("nonlinear",)),
)  # fmt: skip

LOOPS = Row("loops", Kind.NAMED, "controllers closed around each local model", each(Kind.BLOCK, LOOP_WORDS))
LOOPS_OF_POINT = replace(  # what it leaves out is that of the spec, so nothing is required here
    LOOPS,
    meaning="what this point overrides of the loops",
    of=each(Kind.BLOCK, tuple(replace(row, required=False) for row in LOOP_WORDS)),
)
