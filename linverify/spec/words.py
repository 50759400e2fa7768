"""The language as data: every word, what may stand behind it, and what it means.

The reader, its messages, the JSON Schema for editors and the reference table all come from here. A word whose check
is not built yet stands here too (`available` is false), so that it is refused by name instead of being unknown.
"""

from __future__ import annotations

from collections.abc import Iterator

from .grammar import FORMAT as FORMAT
from .grammar import SIGNAL as SIGNAL
from .grammar import Kind as Kind
from .grammar import Row as Row
from .grammar import default_of as default_of
from .grammar import each, later
from .grammar import row_of as row_of
from .loop_words import LOOPS, LOOPS_OF_POINT
from .mode_words import ACTUATOR_WORDS, MODE_WORDS

DERIVE = "derive"  # behind `local_models: source`, for models that nobody delivered
SHAPES = ("step", "pulse", "doublet", "ramp", "sine", "sweep", "multisine", "walk")

LIMIT_WORDS = (
    Row("range", Kind.RANGE, "both limits", dimension=SIGNAL),
    Row("min", Kind.QUANTITY, "lower limit", dimension=SIGNAL),
    Row("max", Kind.QUANTITY, "upper limit", dimension=SIGNAL),
    Row("rate", Kind.QUANTITY, "largest change per time", dimension="the signal's per time", sign="+"),
)

DISCERNS = (
    Row("gain", Kind.FRACTION, "a gain error of this size must show", sign="+"),
    Row("delay", Kind.QUANTITY, "a delay of this size must show", dimension="time", sign="+"),
)

DRIVE_WORDS = (
    Row("horizon", Kind.QUANTITY, "length of a drive", dimension="time", required=True, sign="+"),
    Row("every", Kind.QUANTITY, "inputs change at these instants only", dimension="time", required=True, sign="+"),
    Row("course", Kind.CHOICE, "between the instants", default="held", choices=("held", "straight")),
    Row("amplitude", Kind.NAMED, "how far each input moves about trim", each(Kind.AMPLITUDE, dimension=SIGNAL)),
    Row("rate", Kind.NAMED, "how fast each input moves; default from the envelope",
        each(Kind.QUANTITY, dimension="the signal's per time", sign="+")),
    Row("offsets", Kind.NAMED, "initial states off the operating point, up to this much",
        each(Kind.QUANTITY, dimension=SIGNAL, sign="+")),
    Row("shapes", Kind.CHOICES, "menu of the random drives", default="[" + ", ".join(SHAPES) + "]", choices=SHAPES),
    Row("count", Kind.COUNT, "how many random drives", default="300", sign="+", most=100_000),
    Row("search", Kind.COUNT, "how many examples hunt the worst case", default="150", sign="0+", most=10_000),
    Row("loop", Kind.NAME, "both models run with this loop closed"),
    Row("at", Kind.CHOICE, "drives add to what the loop moves, or to its set point", default="input",
        choices=("input", "set_point"), needs="loop"),
    Row("discerns", Kind.BLOCK, "what these drives must be able to show", DISCERNS),
    Row("pinned", Kind.FILES, "drives that failed once and are replayed first"),
)  # fmt: skip

BAND_WORDS = (
    Row("peak", Kind.SIZE, "largest error", dimension=SIGNAL, sign="+"),
    Row("rms", Kind.SIZE, "root mean square of the error", dimension=SIGNAL, sign="+"),
    Row("relative", Kind.RELATIVE, "largest error over the plant's own peak deviation", sign="+"),
    Row("wider_of", Kind.WIDER_OF, "the wider of a size and a share of the plant's own peak deviation",
        dimension=SIGNAL, sign="+"),
    Row("final", Kind.SIZE, "error at the end of completed drives", dimension=SIGNAL, sign="+"),
    Row("from", Kind.QUANTITY, "nothing before this time counts", dimension="time", sign="0+"),
)  # fmt: skip

SHARED_POINT_WORDS = (
    Row("hold", Kind.NAMED, "required values of states, inputs, outputs", each(Kind.QUANTITY, dimension=SIGNAL)),
    Row("find", Kind.NAMES, "the unknowns; default: every state and input not held"),
    Row("start", Kind.NAMED, "first guess of the search", each(Kind.QUANTITY, dimension=SIGNAL)),
    Row("rates", Kind.NAMED, "states that drift freely or move steadily; default 0",
        each(Kind.RATE, dimension="the signal's per time")),
    Row("minimize", Kind.NAMED, "weights of squared distances from `start`", each(Kind.NUMBER, sign="+")),
    Row("expect", Kind.NAMED, "trimmed values that must not wander", each(Kind.EXPECT, dimension=SIGNAL)),
    Row("parameters", Kind.NAMED, "overrides of the plant's parameters",
        each(Kind.QUANTITY, dimension="the parameter's")),
    Row("drives", Kind.DRIVES, "what this point overrides of the drives", DRIVE_WORDS),
    Row("error_bands", Kind.BANDS, "what this point overrides of the error bands", BAND_WORDS),
    Row("modes", Kind.MODES, "limits on poles instead of those of the spec", MODE_WORDS),
    LOOPS_OF_POINT,
)  # fmt: skip

AXIS_WORDS = (
    Row("from", Kind.QUANTITY, "first value", dimension=SIGNAL, required=True),
    Row("to", Kind.QUANTITY, "last value", dimension=SIGNAL, required=True),
    Row("count", Kind.COUNT, "how many values", required=True, sign="+"),
)

POINT_WORDS = (
    *SHARED_POINT_WORDS,
    Row("sweep", Kind.SWEEP, "one operating point for each combination of values",
        (Row("*", Kind.SWEPT, "", AXIS_WORDS, SIGNAL), Row("table", Kind.TEXT, "a CSV file: one row a point"))),
    Row("skip", Kind.PATTERNS, "cells known to have no trim; reported as skipped"),
)  # fmt: skip

RESPONSE_WORDS = (
    Row("within", Kind.FRACTION, "largest difference, of |G|", required=True, sign="+"),
    Row("between", Kind.RANGE, "frequencies, in rad/s or Hz", dimension="frequency", required=True),
    Row("floor", Kind.FRACTION, "share of the peak of |G| below which |G| does not shrink the limit", default="1 %",
        sign="0+"),
)  # fmt: skip

GAIN_WORDS = (
    Row("singular_values", Kind.FRACTION, "largest difference of static singular values, of each", sign="+"),
    Row("relative_gain", Kind.NUMBER, "largest difference of static relative gains", sign="+"),
    Row("determinant_sign", Kind.CHOICE, "sign of the determinant of the static gains", choices=("same",)),
)

AGREE_WORDS = (
    Row("point", Kind.FRACTION, "claimed operating point against ours, in nominal sizes", default="1 %", sign="+"),
    Row("entries", Kind.FRACTION, "each entry in nominal sizes, of the largest term of its row", sign="+"),
    Row("response", Kind.BLOCK, "frequency response", RESPONSE_WORDS),
    Row("gains", Kind.BLOCK, "static gains", GAIN_WORDS),
)

KEEP_WORDS = (
    Row("states", Kind.NAMES, "states of the reduced model; default: all"),
    Row("inputs", Kind.NAMES, "its inputs; default: all"),
    Row("outputs", Kind.NAMES, "its outputs; default: all"),
)

LOCAL_MODEL_WORDS = (
    Row("source", Kind.SOURCE, "where local models come from", default=DERIVE),
    Row("keep", Kind.BLOCK, "states, inputs, outputs of a reduced model", KEEP_WORDS),
    Row("others", Kind.CHOICE, "what is left out is frozen or settled", choices=("freeze", "settle")),
    Row("with", Kind.NAMES, "loops that are closed inside the local model, derived or delivered"),
    Row("agree", Kind.BLOCK, "delivered against derived", AGREE_WORDS),
)  # fmt: skip

DELAY_WORDS = (
    Row("inputs", Kind.NAMED, "dead time of each input", each(Kind.QUANTITY, dimension="time", sign="0+")),
    Row("outputs", Kind.NAMED, "dead time of each output", each(Kind.QUANTITY, dimension="time", sign="0+")),
)

REQUIREMENT_WORDS = (
    Row("text", Kind.TEXT, "the requirement"),
    Row("source", Kind.TEXT, "where it stands"),
    Row("checks", Kind.PATTERNS, "the checks that show it", required=True),
)

SPEC_WORDS = (
    Row("linverify", Kind.FORMAT, "format number", required=True),
    Row("title", Kind.TEXT, "one line for reports", shared=False),
    Row("plant", Kind.PLANT, "the plant", required=True),
    Row("parameters", Kind.NAMED, "overrides of the plant's own defaults",
        each(Kind.QUANTITY, dimension="the parameter's")),
    Row("time", Kind.QUANTITY, "the time of trim; needed by a plant that depends on it", dimension="time",
        default="0 s"),
    Row("wraps", Kind.NAMES, "angles compared modulo a turn"),
    Row("delays", Kind.BLOCK, "dead time outside the plant function", DELAY_WORDS),
    Row("envelope", Kind.NAMED, "where the plant may be", each(Kind.LIMITS, LIMIT_WORDS, SIGNAL)),
    Row("exits", Kind.BLOCK, "what leaving the envelope means", (
        Row("complete", Kind.FRACTION, "share of the random drives that must run to the end", default="90 %", sign="+"),
        Row("mismatch", Kind.CHOICE, "an exit that the local model did not predict", default="fail",
            choices=("fail", "report")))),
    Row("trims", Kind.BLOCK, "how exact an equilibrium is", (
        Row("accuracy", Kind.NUMBER, "each rate, in nominal sizes of its state a second", default="1e-8",
            sign="+"),)),
    Row("every_point", Kind.BLOCK, "what all operating points share", SHARED_POINT_WORDS),
    Row("operating_points", Kind.POINTS, "the operating points", each(Kind.BLOCK, POINT_WORDS), required=True,
        shared=False),
    Row("local_models", Kind.BLOCK, "what is being verified", LOCAL_MODEL_WORDS),
    Row("differentiable", Kind.BLOCK, "what a kink is", (
        Row("slope_gap", Kind.FRACTION, "largest gap of one-sided slopes", default="5 %", sign="+"),
        Row("side", Kind.NAMED, "inputs that can only move one way",
            (Row("*", Kind.CHOICE, "", choices=("up", "down")),)))),
    Row("drives", Kind.DRIVES, "the input sequences that both models are driven with", DRIVE_WORDS),
    Row("error_bands", Kind.BANDS, "how far plant and local model may differ", BAND_WORDS),
    later("frequency_bands", "response to small sines against the local model"),
    Row("modes", Kind.MODES, "limits on the local model's poles, zeros and gains", MODE_WORDS),
    Row("actuators", Kind.NAMED, "lags and limits in series with plant inputs", each(Kind.BLOCK, ACTUATOR_WORDS)),
    LOOPS,
    later("variations", "parameters that are not known exactly"),
    later("reach", "how far the drives can be scaled"),
    later("handover", "between neighbouring operating points"),
    later("coverage", "share of the envelope that is verified"),
    later("budget", "real-time use"),
    Row("requirements", Kind.NAMED, "traceability", each(Kind.BLOCK, REQUIREMENT_WORDS), shared=False),
    later("accepted", "known shortfalls that are signed for"),
)  # fmt: skip

# checks of the language, and whether this version has them
CHECKS = {
    "trims": True,
    "differentiable": True,
    "agrees": True,
    "follows": True,
    "responds": False,
    "modes": True,
    "margins": True,
    "reach": False,
    "handover": False,
    "coverage": False,
    "budget": False,
}


def reference(rows: tuple[Row, ...] = SPEC_WORDS, above: str = "") -> Iterator[tuple[str, str, str, str]]:
    """Lines of the reference table: dotted word, what stands behind it, default, meaning."""
    for row in rows:
        path = f"{above}{row.word.replace('*', 'NAME')}"
        behind = ", ".join(row.choices) if row.kind is Kind.CHOICE else row.kind.value
        if not row.available:
            yield path, Kind.NONE.value, "", row.meaning
            continue
        if row.word != "*":
            yield path, behind, row.default or ("required" if row.required else ""), row.meaning
        inner = row.of[0].of if row.kind in (Kind.NAMED, Kind.POINTS) else row.of
        between = ".NAME." if row.kind in (Kind.NAMED, Kind.POINTS, Kind.BANDS) else "."
        if above.startswith("operating_points.") and row in SHARED_POINT_WORDS:
            continue
        if above and row.kind in (Kind.DRIVES, Kind.BANDS):
            continue
        yield from reference(inner, f"{path}{between}")
