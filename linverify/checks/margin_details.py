"""What `margins` tells beside its figures: `details["margins"]` of the verdict, plain values for reports.

    loop, controller, broken_at      texts: its name, its controller as the spec writes it, plant_input or plant_output
    measures, moves, inside          lists of names; `inside`: loops that are closed inside this one
    delay, sample                    quantities; absent where there is none (a continuous loop has no `sample`)
    lags                             {input: quantity}: actuators in front of what is moved, here and by loops inside
    late, old                        {input or output: quantity}: dead times of the plant on the way, the same
    frequency_unit                   of every `frequency` below: rad per time unit of the plant
    stable                           true or false; of an unstable loop nothing but poles follows
    channels                         a list, one a channel of the break, each with the other channels closed:
        channel                      its name: what is moved, or what is measured
        gain_up, gain_down           met figures; factors above and below one, gain_down 0 where any decrease is allowed
        phase                        met figure in deg: the smaller of what may be added and taken away
        delay                        met figure, beyond what is declared
        sensitivity_peak, complementary_peak      met figures, ratios
        disk                         met figure (see `disk` below)
        crossovers                   list of {frequency, phase (deg left until instability, signed)}
        phase_crossings              list of {frequency, gain (the factor that would make the loop unstable)}
    all_channels                     only where there are several:
        sensitivity_peak, complementary_peak      met figures at the break: the largest singular value
        disk                         {input, output, both}: met figures, all channels at once
    steps                            list of {channel, overshoot (%), settling, within (%), final}, of a set point
    closed_loop_poles                list of poles that the loop moves; of a loop with dead time, those that were found
    unmoved_poles                    list of poles with {states: {name: share}, excused: true where `leaves` covers it}
    limits                           list of {word, text} and, of ready-made limits, {rule, source, caution}

A quantity is {value, unit}. A met figure is {value, unit, error} and, where it was met at one, {frequency}; infinite
values stand as such. A disk margin has {guaranteed: {gain_down, gain_up (factors), phase (deg)}} beside. A pole is
{real, imag, natural_frequency, damping, time_constant}, of a sampled loop with {z_real, z_imag}; the first pair is then
log(z) / sample. What could not be found is left out. `details["confirmed"]`, a list, tells what `confirm_margin` tried.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

from ..core.case import Case
from ..core.loop import Loop
from ..numerics.closing import Opened
from ..numerics.loop_margins import Channel, Joint, LoopMargins, Stepped, in_s
from ..numerics.margins import Crossing, Found, guarantee
from ..numerics.structured import Bounded

DEGREES = 180.0 / math.pi


def told(case: Case, loop: Loop, opened: Opened, found: LoopMargins, excused: Sequence[bool]) -> dict[str, Any]:
    """`details["margins"]`; excused: of each pole that the loop does not move, whether `leaves` covers it."""
    time = case.plant.time_unit
    step = loop.sample
    made: dict[str, Any] = {
        "loop": loop.name,
        "controller": loop.controller.text,
        "broken_at": loop.break_at,
        "measures": list(loop.measures),
        "moves": [str(moved) for moved in loop.moves],
        "inside": list(opened.inside),
        "frequency_unit": f"rad/{time}",
        "stable": found.stable,
        "limits": [_limit(limit) for limit in loop.require],
    }
    if loop.delay:
        made["delay"] = {"value": loop.delay, "unit": time}
    if step is not None:
        made["sample"] = {"value": step, "unit": time}
    made |= _on_the_way(case, loop, opened, time)
    values = found.poles.values if found.poles is not None else found.delayed
    made["closed_loop_poles"] = [pole(complex(value), step) for value in values]
    made["unmoved_poles"] = [
        {**pole(one.value, step), "states": dict(one.shares), "excused": covered}
        for one, covered in zip(found.unmoved, excused, strict=True)
    ]
    if found.stable:
        made["channels"] = [_channel(one, time) for one in found.channels]
    if found.steps:
        made["steps"] = [_step(step, time) for step in found.steps]
    if found.joint is not None:
        made["all_channels"] = _joint(found.joint)
    return made


def _on_the_way(case: Case, loop: Loop, opened: Opened, time: str) -> dict[str, Any]:
    """What stands between the loop and the plant, and between the plant and the loop."""
    loops = (loop, *(case.loops[name] for name in opened.inside))
    moved = [moved.name for one in loops for moved in one.moves if not moved.loop]
    measured = [name for one in loops for name in one.measures]
    found = {
        "lags": {name: case.actuators[name].lag for name in moved if name in case.actuators},
        "late": {name: case.delays.inputs.get(name, 0.0) for name in moved},
        "old": {name: case.delays.outputs.get(name, 0.0) for name in measured},
    }
    told = {
        word: {name: {"value": value, "unit": time} for name, value in values.items() if value > 0.0}
        for word, values in found.items()
    }
    return {word: values for word, values in told.items() if values}


def pole(value: complex, step: float | None) -> dict[str, float]:
    """A pole in plain values; value: in s, of a sampled loop in z."""
    s = in_s(value, step)
    natural = abs(s)
    made = {
        "real": s.real,
        "imag": s.imag,
        "natural_frequency": natural,
        "damping": math.nan if natural == 0 else 1.0 if math.isinf(natural) else -s.real / natural,
        "time_constant": math.inf if s.real == 0 else -1.0 / s.real,
    }
    return made if step is None else {**made, "z_real": value.real, "z_imag": value.imag}


def _limit(limit: Any) -> dict[str, str]:
    ready = {"rule": limit.rule, "source": limit.source, "caution": limit.caution}
    return {"word": limit.word, "text": limit.text, **{word: text for word, text in ready.items() if text}}


def _met(found: Found, unit: str = "", scale: float = 1.0) -> dict[str, Any]:
    made: dict[str, Any] = {"value": found.value * scale, "unit": unit, "error": found.error * scale}
    return made if math.isnan(found.frequency) else {**made, "frequency": found.frequency}


def _channel(channel: Channel, time: str) -> dict[str, Any]:
    one = channel.margins
    figures = {
        "gain_up": _met(one.gain_up),
        "gain_down": _met(one.gain_down),
        "phase": _met(one.phase, "deg", DEGREES),
        "delay": _met(one.delay, time),
        "sensitivity_peak": _met(one.sensitivity),
        "complementary_peak": _met(one.complementary),
        "disk": {**_met(one.disk), "guaranteed": guaranteed(one.disk.value)},
    }
    return {
        "channel": channel.name,
        **{word: figure for word, figure in figures.items() if not math.isnan(figure["value"])},
        "crossovers": [{"frequency": each.frequency, "phase": each.margin * DEGREES} for each in one.crossovers],
        "phase_crossings": [_phase_crossing(each) for each in one.phase_crossings],
    }


def _phase_crossing(each: Crossing) -> Mapping[str, float]:
    return {"frequency": each.frequency, "gain": each.margin}


def guaranteed(alpha: float) -> dict[str, float]:
    """What a disk margin promises: gain factors down and up, phase in deg, each alone."""
    if math.isnan(alpha):
        return {}
    up, phase = guarantee(alpha)
    return {"gain_down": 0.0 if math.isinf(up) else 1.0 / up, "gain_up": up, "phase": phase * DEGREES}


def _step(step: Stepped, time: str) -> dict[str, Any]:
    return {
        "channel": step.channel,
        "overshoot": _met(step.overshoot, "%", 100.0),
        "settling": _met(step.settling, time),
        "within": {"value": 100.0 * step.within, "unit": "%"},
        "final": step.final,
    }


def _joint(joint: Joint) -> dict[str, Any]:
    disks = {"input": joint.at_input, "output": joint.at_output, "both": joint.at_both}
    return {
        "sensitivity_peak": _met(joint.sensitivity),
        "complementary_peak": _met(joint.complementary),
        "disk": {side: _disk(disk) for side, disk in disks.items() if disk is not None},
    }


def _disk(disk: Bounded) -> dict[str, Any]:
    error = disk.high - disk.low if disk.high > disk.low else 0.0  # both may be infinite
    return {**_met(Found(disk.low, disk.frequency, error)), "guaranteed": guaranteed(disk.low)}
