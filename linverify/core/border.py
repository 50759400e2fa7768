"""Border control: what a plant function may answer, and how a wrong answer is told.

A plant is somebody else's code. Each call gets read-only copies of its arguments, and each answer is held against
shape, type and finiteness before a number of it is used.
"""

from __future__ import annotations

import traceback
from collections.abc import Callable, Mapping

import numpy as np

from .errors import PlantError
from .model import Array
from .plant import PlantFunction
from .shown import number, with_unit
from .signals import Signals

Told = Callable[[], str]  # put into words only where a call failed


def told_instant(t: float, time_unit: str, step: float | None) -> str:
    """The time of a call in words: `t = 0.3 s`, or `step 158` of a difference equation, which counts steps."""
    return f"t = {number(t, 9)} {time_unit}" if step is None else f"step {number(t, 9)}"


def told_call(instant: str, x: Array, u: Array, states: Signals, inputs: Signals) -> str:
    """The arguments of one call in words: `t = 0 s, speed = 12.3 m/s`; instant: the first part, by `told_instant`."""
    words = [instant]
    for signals, values in ((states, x), (inputs, u)):
        if values.ndim == 2:
            return f"{instant} and {values.shape[1]} columns of states and inputs"
        pairs = zip(signals.names, values, signals.units, strict=True)
        words += [f"{name} = {with_unit(number(float(value), 9), unit)}" for name, value, unit in pairs]
    return ", ".join(words)


def read_only(values: Array) -> Array:
    """A copy that its receiver cannot change."""
    copy = np.array(values, dtype=np.float64)
    copy.setflags(write=False)
    return copy


def called(
    function: PlantFunction, what: str, t: float, x: Array, u: Array, p: Mapping[str, float], told: Told
) -> object:
    """The answer of a plant function; an exception of it becomes a PlantError that names the call."""
    try:
        # what is not finite is told by `accepted`; the plant's floating-point warnings would only repeat it
        with np.errstate(all="ignore"):
            return function(t, x, u, p)
    except PlantError:  # of a plant inside this one, which has named its own call
        raise
    except (Exception, SystemExit) as error:  # a plant that exits would end the run with a status of its own choice
        raise PlantError(f"{what} raised {_told_error(error)} when called with {told()}") from error


def accepted(answer: object, what: str, rows: Signals, like: Array, told: Told) -> Array:
    """`answer` as float64 array of shape (rows,) or (rows, N); raises PlantError when it is of another kind."""
    values = _as_array(answer, what, told)
    shape = (len(rows), *like.shape[1:])
    if values.shape != shape:
        raise PlantError(
            f"{what} returned an array of shape {values.shape} when called with {told()}; expected {shape}, "
            f"one row each for {', '.join(rows.names)}"
        )
    return values


def require_finite(values: Array, what: str, rows: Signals, told: Told) -> None:
    """Raise PlantError that names the first row of `values` with NaN or an infinity."""
    bad = ~np.isfinite(values)
    if bad.any():
        row = int(np.argmax(bad.reshape(len(rows), -1).any(axis=1)))
        number = values.reshape(len(rows), -1)[row][bad.reshape(len(rows), -1)[row]][0]
        raise PlantError(f"{what} returned {float(number)} for {rows.names[row]} when called with {told()}")


def _as_array(answer: object, what: str, told: Told) -> Array:
    try:
        values = np.asarray(answer)
    except ValueError as error:
        raise PlantError(f"{what} returned rows of unlike shape when called with {told()}: {error}") from error
    if values.dtype == object and all(isinstance(item, float) for item in values.ravel()):
        values = values.astype(np.float64)
    if not np.issubdtype(values.dtype, np.floating):
        raise PlantError(
            f"{what} returned {_kind(values)} when called with {told()}; expected real floating-point numbers"
        )
    return values.astype(np.float64)


def _kind(values: np.ndarray[tuple[int, ...], np.dtype[np.generic]]) -> str:
    names = {"c": "complex numbers", "i": "integers", "u": "integers", "b": "truth values", "O": "Python objects"}
    return names.get(values.dtype.kind, f"values of type {values.dtype}")


def _told_error(error: BaseException) -> str:
    text = f"{type(error).__name__}: {error}"
    if "read-only" in str(error):
        text += " (a plant function must not write into x or u)"
    frames = traceback.extract_tb(error.__traceback__)
    if len(frames) > 1:  # the first frame is ours
        name = frames[-1].filename.replace("\\", "/").rsplit("/", 1)[-1]
        text += f" ({name}, line {frames[-1].lineno})"
    return text
