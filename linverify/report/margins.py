"""Margins of one loop as Markdown: what the loop is, its margins by channel, poles, step, where limits come from.

The words of `details["margins"]` are those that the check documents; what is missing is left out, never guessed.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from ..core.shown import decibels
from . import modal, quantity, text
from .forms import Rows, cell, complex_told, is_number, is_quantity, plain_blocks, rows_of
from .tables import escaped, grid

SIGN = (
    "A controller takes set point minus measurement; the loop is broken at one place and margins hold there. Gain and "
    "phase margins change one thing in one channel while the others stay closed; a disk margin allows for gain and "
    "phase at the same time, and what it guarantees is told beside it."
)
_BREAK = {"plant_input": "at the plant's input", "plant_output": "at the plant's output"}
_HEAD = {
    "controller": "controller",
    "measures": "measures",
    "moves": "moves",
    "inside": "loops closed inside",
    "delay": "declared dead time",
    "sample": "sample time",
    "lags": "lags of actuators",
    "late": "dead times of inputs",
    "old": "dead times of measurements",
}
CROSSINGS = (
    "Each row tells the one change that would bring the loop to -1 at that frequency: more lag or more lead of phase, "
    "or a factor of gain. The nearest of them are the margins."
)
ENDLESS = " (those that were found; with dead time there are infinitely many)"
_SIDES = {"input": "at the input", "output": "at the output", "both": "at both"}


def blocks(rest: dict[str, Any], time_unit: str) -> list[str]:
    """Blocks of what `margins` tells; its words are taken out of `rest`."""
    found = rest.get("margins")
    if not isinstance(found, Mapping):
        return []
    rest.pop("margins")
    tried = rows_of(rest, "confirmed")
    left, unit = dict(found), str(found.get("frequency_unit", ""))
    left.pop("frequency_unit", None)
    endless = "sample" not in left and any(left.get(word) for word in ("delay", "late", "old"))
    made = [_loop(left)]
    if channels := rows_of(left, "channels"):
        made += [
            "Margins, one channel at a time:",
            _channels(channels, unit, _asked(found)),
            escaped(SIGN),
            text.CAUTION,
        ]
        made += ["Disk margins and what they guarantee:", _disks(channels, left.get("all_channels"), unit)]
        made += _crossings(channels, unit)
    made += _all_channels(left.pop("all_channels", None), unit)
    if steps := rows_of(left, "steps"):
        made += ["Step of the set point:", _steps(steps)]
    if poles := rows_of(left, "closed_loop_poles"):
        upper = [row for row in poles if not _float(row.get("imag")) < 0.0]  # a pair stands in one row
        upper = sorted(upper, key=lambda row: _float(row.get("natural_frequency")))
        told = f"Closed-loop poles, per {time_unit or 'time unit'}{ENDLESS if endless else ''}:"
        made += [told, modal.table(upper, time_unit)]
    if poles := rows_of(left, "unmoved_poles"):
        made += [f"Poles that this loop does not move, per {time_unit or 'time unit'}:", _unmoved(poles)]
    if tried:
        made += ["Margins tried on the nonlinear plant, after a small kick:", _tried(tried)]
    made += _limits(rows_of(left, "limits"))
    return made + plain_blocks(left)


def _loop(left: dict[str, Any]) -> str:
    """What the loop is, and whether it is stable."""
    rows = [("loop", cell(left.pop("loop", "")))]
    for word, told in _HEAD.items():
        value = left.pop(word, None)
        if value not in (None, [], {}, ""):
            rows.append((told, cell(value)))
    if "broken_at" in left:
        where = str(left.pop("broken_at"))
        rows.append(("broken", _BREAK.get(where, where)))
    if "stable" in left:
        rows.append(("closed loop", "stable" if left.pop("stable") is True else "unstable"))
    return grid(("what", "value"), rows)


def _asked(found: Mapping[str, Any]) -> bool:
    """Whether a delay margin is asked for: of some sampled loops none is looked for otherwise."""
    limits = found.get("limits")
    rows = limits if isinstance(limits, list) else []
    return any(isinstance(row, Mapping) and row.get("word") == "delay_margin" for row in rows)


def _channels(channels: Rows, unit: str, asked: bool) -> str:
    headers = (
        "channel", "gain up", "gain down", "phase", "delay", "Ms (sensitivity)", "Mt (complementary sensitivity)",
    )  # fmt: skip
    told = [
        (
            cell(one.get("channel", "")),
            _met(one.get("gain_up"), unit, ratio=True),
            _met(one.get("gain_down"), unit, ratio=True),
            _met(one.get("phase"), unit),
            _met(one.get("delay"), unit) if "delay" in one or asked else "not asked for",
            _met(one.get("sensitivity_peak"), unit, ratio=True),
            _met(one.get("complementary_peak"), unit, ratio=True),
        )
        for one in channels
    ]
    return grid(headers, told)


def _met(value: Any, unit: str, *, ratio: bool = False) -> str:
    """A figure and the frequency it was met at: 8.5 dB (2.66) at 3.2 rad/s."""
    if not isinstance(value, Mapping) or not is_number(value.get("value")):
        return cell(value)
    figure, own = float(value["value"]), str(value.get("unit", ""))
    error = _float(value.get("error"))
    known = f" +- {quantity.quantity(error, own, 2)}" if error > 1e-4 * abs(figure) else ""
    told = _ratio(figure, known) if ratio else f"{quantity.quantity(figure, own, 4)}{known}"
    frequency = _float(value.get("frequency"))
    if math.isinf(frequency):
        return f"{told} in the limit of high frequency"
    return told if math.isnan(frequency) else f"{told} at {quantity.quantity(frequency, unit, 4)}"


def _ratio(value: float, known: str = "") -> str:
    """A factor in dB with the factor, and what that is known to, beside; zero and infinity are no limit at all."""
    if value == 0.0 or math.isinf(value):
        return "no limit"
    if value < 0.0 or math.isnan(value):
        return quantity.number(value, 4)
    return f"{quantity.quantity(decibels(value), 'dB', 4)} (factor {quantity.number(value, 4)}{known})"


def _disks(channels: Rows, several: Any, unit: str) -> str:
    rows = [(cell(one.get("channel", "")), one.get("disk")) for one in channels]
    disks = several.get("disk") if isinstance(several, Mapping) else None
    if isinstance(disks, Mapping):
        rows += [(f"all, {_SIDES.get(str(side), side)}", disk) for side, disk in disks.items()]
    told = [(name, _met(disk, unit), *_guaranteed(disk)) for name, disk in rows if isinstance(disk, Mapping)]
    return grid(("channel", "disk margin", "any gain change", "or any phase change"), told)


def _guaranteed(disk: Mapping[str, Any]) -> tuple[str, str]:
    """What a disk margin promises of gain alone and of phase alone."""
    promised = disk.get("guaranteed")
    if not isinstance(promised, Mapping):
        return quantity.ABSENT, quantity.ABSENT
    down, up, phase = (_float(promised.get(word)) for word in ("gain_down", "gain_up", "phase"))
    if math.isnan(down + up + phase):
        return quantity.ABSENT, quantity.ABSENT
    if math.isinf(up):
        return "any factor above 0", f"+-{quantity.quantity(phase, 'deg', 4)}"
    factors = f"factor {quantity.number(down, 4)} to {quantity.number(up, 4)}"
    return f"{_decibels(down)} to {_decibels(up)} dB ({factors})", f"+-{quantity.quantity(phase, 'deg', 4)}"


def _decibels(ratio: float) -> str:
    told = quantity.number(decibels(ratio), 3)
    return told if told.startswith("-") else f"+{told}"


def _crossings(channels: Rows, unit: str) -> list[str]:
    """Every crossover, and every frequency at which a change of gain alone reaches instability."""
    rows = []
    for one in channels:
        name = cell(one.get("channel", ""))
        for word, told, change in (
            ("crossovers", "gain is one", _turn),
            ("phase_crossings", "phase is -180 deg", _factor),
        ):
            found = one.get(word)
            for each in found if isinstance(found, list) else ():
                if isinstance(each, Mapping):
                    at = quantity.quantity(_float(each.get("frequency")), unit, 4)
                    rows.append((name, told, at, change(each)))
    headers = ("channel", "crossing", "at", "reaches -1 with")
    return ["Crossings:", grid(headers, rows), escaped(CROSSINGS)] if rows else ["Crossings: none."]


def _turn(each: Mapping[str, Any]) -> str:
    phase = _float(each.get("phase"))
    told = quantity.quantity(abs(phase), "deg", 4)
    return told if math.isnan(phase) else f"{told} more {'lead' if phase < 0.0 else 'lag'}"


def _factor(each: Mapping[str, Any]) -> str:
    return f"gain times {quantity.number(_float(each.get('gain')), 4)}"


def _float(value: Any) -> float:
    return float(value) if is_number(value) else math.nan


def _all_channels(found: Any, unit: str) -> list[str]:
    if not isinstance(found, Mapping):
        return []
    words = {"sensitivity_peak": "Ms (sensitivity)", "complementary_peak": "Mt (complementary sensitivity)"}
    rows = [(told, _met(found[word], unit, ratio=True)) for word, told in words.items() if word in found]
    return ["All channels at once, by largest singular value:", grid(("what", "value"), rows)] if rows else []


def _steps(rows: Rows) -> str:
    told = [
        (
            cell(row.get("channel", "")),
            _share(row.get("overshoot"), "%"),
            _share(row.get("settling"), ""),
            _share(row.get("within"), "%"),
            _share(row.get("final"), ""),
        )
        for row in rows
    ]
    return grid(("channel", "overshoot", "settles in", "to within", "final value, of the step"), told)


def _share(value: Any, unit: str) -> str:
    if is_quantity(value) or isinstance(value, Mapping):
        return _met(value, "")
    return quantity.quantity(value, unit, 4) if is_number(value) else cell(value)


def _unmoved(rows: Rows) -> str:
    told = []
    for row in rows:
        shares = row.get("states")
        named = shares.items() if isinstance(shares, Mapping) else ()
        words = sorted(((name, _float(share)) for name, share in named), key=lambda item: (-item[1], item[0]))
        states = ", ".join(f"{name} {quantity.percent(round(share, 3))}" for name, share in words[:3])
        stands = "stable" if _float(row.get("real")) < 0.0 else "not stable"
        stands = "left to others" if row.get("excused") is True else stands
        told.append((complex_told(row.get("real"), row.get("imag")), states or quantity.ABSENT, stands))
    return grid(("pole", "mostly", "note"), told)


def _tried(rows: Rows) -> str:
    must = {"rest": "come to rest", "grow": "grow"}
    told = [
        (
            cell(row.get("change", "")),
            cell(row.get("signal", "")),
            must.get(str(row.get("must")), cell(row.get("must"))),
            cell(row.get("became", "")),
            quantity.quantity(_float(row.get("growth")), str(row.get("unit", "")), 4),
            cell(row.get("status", "")),
        )
        for row in rows
    ]
    headers = ("change", "in", "a small motion must", "the plant", "growth", "verdict")
    return grid(headers, told, right=("growth",))


def _limits(rows: Rows) -> list[str]:
    """Ready-made limits with their sources; those that the spec wrote stand in the compliance table."""
    ready: dict[tuple[str, ...], list[str]] = {}
    for row in rows:
        if row.get("rule"):
            key = tuple(cell(row.get(word, "")) for word in ("rule", "source", "caution"))
            ready.setdefault(key, []).append(cell(row.get("word", "")).replace("_", " "))
    if not ready:
        return []
    told = [(rule, ", ".join(words), source, caution) for (rule, source, caution), words in ready.items()]
    headers = ("rule", "limits", "source", "beware")
    return ["Ready-made limits, where they come from and what to beware of:", grid(headers, told)]
