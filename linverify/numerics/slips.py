"""Slips of hand that leave a model wrong in a known way: signs, transposition, exchanged names, units, time, sampling.

Each slip says what the delivered model would be had it been made, so that it can be held against the whole model. None
of them has a number to choose, except the sample time of a discrete model that was handed over as a continuous one.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np

from ..core.model import Array, LocalModel, frozen_array
from ..core.signals import Signals
from ..core.units import UnitError, convert

# parts of a unit text and what engineers write in its place
_UNITS = """
rad>deg deg>rad m/s>kn m/s>km/h m/s>ft/s kn>m/s m>ft m>mm m>cm m>km ft>m cm>m mm>m N>kN kN>N N>lbf lbf>N kg>t t>kg kg>lb
lb>kg Pa>kPa Pa>bar kPa>Pa bar>Pa W>kW kW>W V>mV mV>V A>mA mA>A K>degF degC>degF s>min min>s h>s 1>% %>1
"""
UNITS = tuple(pair.split(">") for pair in _UNITS.split())
TIMES = (("min", 60.0), ("h", 3600.0), ("ms", 1e-3))  # of a second; a plant in minutes has the inverse

Blocks = tuple[Array, Array, Array, Array]


@dataclass(frozen=True, slots=True, eq=False)
class Slip:
    """A model as it would have been delivered. kind: "sign", "unit", ...; narrow: it touches a single entry."""

    text: str
    kind: str
    model: LocalModel
    narrow: bool = False


def slips(model: LocalModel, time_unit: str, *, named: bool) -> Iterator[Slip]:
    """Every slip on `model`; those of states only where the delivered states are `named`."""
    yield from _inputs_and_outputs(model)
    yield from _exchanged(model, "inputs", model.inputs)
    yield from _exchanged(model, "outputs", model.outputs)
    yield from _times(model, time_unit)
    if named:
        yield from _entries(model)
        yield from _states(model)
        yield from _exchanged(model, "states", model.states)
        if not np.array_equal(model.A, model.A.T):
            yield Slip("A is transposed", "transpose", _with(model, A=model.A.T))


def scaled(
    model: LocalModel,
    *,
    rows: Array | None = None,
    columns: Array | None = None,
    inputs: Array | None = None,
    outputs: Array | None = None,
) -> LocalModel:
    """`model` with rates and columns of states, inputs and outputs multiplied by factors (n,), (n,), (m,), (k,)."""
    k, m = model.D.shape
    row, column = (np.ones(len(model.A)) if given is None else given for given in (rows, columns))
    of_input = np.ones(m) if inputs is None else inputs
    of_output = (np.ones(k) if outputs is None else outputs)[:, np.newaxis]
    row = row[:, np.newaxis]
    factors = {"A": row * column, "B": row * of_input, "C": of_output * column, "D": of_output * of_input}
    errors = {name: block * np.abs(factors[name]) for name, block in model.errors.items()}
    blocks = {name: getattr(model, name) * factor for name, factor in factors.items()}
    return replace(_with(model, **blocks), errors=errors)


def _with(model: LocalModel, **blocks: Array) -> LocalModel:
    return replace(model, **{name: frozen_array(block) for name, block in blocks.items()})  # type: ignore[arg-type]


def _at(count: int, index: int, factor: float) -> Array:
    factors = np.ones(count)
    factors[index] = factor
    return factors


def _inputs_and_outputs(model: LocalModel) -> Iterator[Slip]:
    for index, (name, unit) in enumerate(zip(model.inputs.names, model.inputs.units, strict=True)):
        count = len(model.inputs)
        yield Slip(f"the sign of {name} is reversed", "sign", scaled(model, inputs=_at(count, index, -1.0)))
        for other, factor in alternatives(unit):
            yield Slip(
                f"{name} is in {other}, not in {unit}", "unit", scaled(model, inputs=_at(count, index, 1.0 / factor))
            )
    for index, (name, unit) in enumerate(zip(model.outputs.names, model.outputs.units, strict=True)):
        count = len(model.outputs)
        yield Slip(f"the sign of output {name} is reversed", "sign", scaled(model, outputs=_at(count, index, -1.0)))
        for other, factor in alternatives(unit):
            yield Slip(
                f"output {name} is in {other}, not in {unit}", "unit", scaled(model, outputs=_at(count, index, factor))
            )


def _states(model: LocalModel) -> Iterator[Slip]:
    n = len(model.states)
    for index, (name, unit) in enumerate(zip(model.states.names, model.states.units, strict=True)):
        turned = _at(n, index, -1.0)
        yield Slip(f"the signs in the row of {name} are reversed", "sign", scaled(model, rows=turned))
        yield from _column(model, index, -1.0, f"by {name} have the wrong sign", "sign")
        yield Slip(f"state {name} counts the other way", "sign", scaled(model, rows=turned, columns=turned))
        for other, factor in alternatives(unit):
            up, down = _at(n, index, factor), _at(n, index, 1.0 / factor)
            yield Slip(f"state {name} is in {other}, not in {unit}", "unit", scaled(model, rows=up, columns=down))
            yield from _column(model, index, 1.0 / factor, f"by {name} are for {other}, not for {unit}", "unit")
            yield Slip(f"the row of {name} is in {other}, not in {unit}", "unit", scaled(model, rows=up))


def _column(model: LocalModel, index: int, factor: float, text: str, kind: str) -> Iterator[Slip]:
    whole = scaled(model, columns=_at(len(model.states), index, factor))
    yield Slip(f"all slopes {text}", kind, whole)
    if model.C[:, index].any():
        yield Slip(f"slopes of rates {text}", kind, replace(model, A=whole.A))


def _entries(model: LocalModel) -> Iterator[Slip]:
    rows = {"A": model.states, "B": model.states, "C": model.outputs, "D": model.outputs}
    columns = {"A": model.states, "B": model.inputs, "C": model.states, "D": model.inputs}
    for matrix, block in (("A", model.A), ("B", model.B), ("C", model.C), ("D", model.D)):
        for i, j in zip(*np.nonzero(block), strict=True):
            name = f"{matrix}[{rows[matrix].names[i]}, {columns[matrix].names[j]}]"
            yield Slip(f"the sign of {name} is reversed", "sign", _one(model, matrix, i, j, -1.0), narrow=True)
            for signals, index, power in ((rows[matrix], i, 1.0), (columns[matrix], j, -1.0)):
                for other, factor in alternatives(signals.units[index]):
                    text = f"{name} takes {signals.names[index]} in {other}, not in {signals.units[index]}"
                    yield Slip(text, "unit", _one(model, matrix, i, j, factor**power), narrow=True)


def _one(model: LocalModel, matrix: str, i: int, j: int, factor: float) -> LocalModel:
    block = np.array(getattr(model, matrix))
    block[i, j] *= factor
    errors = {name: np.array(error) for name, error in model.errors.items()}
    if matrix in errors:
        errors[matrix][i, j] *= abs(factor)
    return replace(_with(model, **{matrix: block}), errors=errors)


def _exchanged(model: LocalModel, kind: str, signals: Signals) -> Iterator[Slip]:
    for i, j in combinations(range(len(signals)), 2):
        order = list(range(len(signals)))
        order[i], order[j] = j, i
        text = f"{kind} {signals.names[i]} and {signals.names[j]} are exchanged"
        yield Slip(text, "exchange", _ordered(model, kind, order))


def _ordered(model: LocalModel, kind: str, order: list[int]) -> LocalModel:
    of_kind: dict[str, dict[str, tuple[int, ...]]] = {
        "states": {"A": (0, 1), "B": (0,), "C": (1,)},
        "inputs": {"B": (1,), "D": (1,)},
        "outputs": {"C": (0,), "D": (0,)},
    }
    axes = of_kind[kind]

    def turned(block: Array, name: str) -> Array:
        for axis in axes.get(name, ()):
            block = np.take(block, order, axis=axis)
        return block

    blocks = {name: turned(getattr(model, name), name) for name in "ABCD"}
    return replace(_with(model, **blocks), errors={name: turned(block, name) for name, block in model.errors.items()})


def _times(model: LocalModel, time_unit: str) -> Iterator[Slip]:
    if model.step is not None:
        return
    ones = np.ones(len(model.states))
    try:
        own = convert(1.0, time_unit, "s")
    except UnitError:
        return
    for name, seconds in (("s", 1.0), *TIMES):
        factor = seconds / own
        if factor != 1.0:
            text = f"rates are per {name}, not per {time_unit}"
            yield Slip(text, "time", scaled(model, rows=factor * ones))


def alternatives(unit: str) -> list[tuple[str, float]]:
    """Other units for a signal and what its numbers are multiplied by in them."""
    found = []
    for part, other in UNITS:
        text = _replaced(unit or "1", part, other)
        if text and (factor := _factor(unit or "1", text)):
            found.append((text, factor))
    return found


def _replaced(unit: str, part: str, other: str) -> str:
    """`unit` with its first factor `part` (or all of it) replaced; empty where it has none."""
    if unit == part:
        return other
    head, _, tail = unit.partition("/")
    if head == part and tail and "/" not in part:
        return f"{other}/{tail}"
    return ""


def _factor(unit: str, other: str) -> float:
    try:
        return convert(1.0, unit, other, difference=True)
    except UnitError:
        return 0.0
