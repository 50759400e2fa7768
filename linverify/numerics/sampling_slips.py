"""Slips with sample times: a continuous model taken for a discrete one or the other way round, and rough recipes."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from ..core.delivered import Course
from ..core.model import Array, LocalModel, frozen_array
from .knobs import Knob, fitted
from .sampled import sampled
from .slips import Slip
from .target import Target

ALIKE = 1e-6  # sample times nearer than this share are one
COURSES: tuple[Course, ...] = ("held", "straight")


def sampling_slips(wanted: Target, continuous: LocalModel | None, time_unit: str) -> Iterator[Slip]:
    """Slips that lead from `continuous`, the reference before it was sampled (None: never), to the delivered model."""
    pair = wanted.pair
    if continuous is None or pair.anonymous:
        return
    continuous = replace(continuous, errors={})  # they are far below the floor of what counts, and dear to carry along
    step, course = pair.delivered.step, pair.delivered.course
    if step is None:
        yield from _taken_for_continuous(wanted, continuous, time_unit)
        return
    at = f"a sample time of {step:.6g} {time_unit}"
    yield Slip(f"the matrices are those of the continuous model, not sampled with {at}", "sampling", continuous)
    other: Course = "straight" if course == "held" else "held"
    yield Slip(f"sampled for inputs that are {other}, not {course}", "sampling", sampled(continuous, step, other))
    n = len(continuous.A)
    euler = {"A": np.eye(n) + step * continuous.A, "B": step * continuous.B}
    yield Slip(f"sampled by one Euler step of {step:.6g} {time_unit}", "sampling", _with(continuous, step, euler))
    half = np.linalg.inv(np.eye(n) - 0.5 * step * continuous.A)
    tustin = {
        "A": half @ (np.eye(n) + 0.5 * step * continuous.A),
        "B": half @ continuous.B * step,
        "C": continuous.C @ half,
        "D": continuous.D + 0.5 * step * continuous.C @ half @ continuous.B,
    }
    yield Slip("sampled by the bilinear rule, not for held inputs", "sampling", _with(continuous, step, tustin))
    time = _time_of(wanted, continuous, course)
    if time is not None and abs(time - step) > ALIKE * step:
        text = f"sampled with {time:.4g} {time_unit}, not with {step:.6g} {time_unit}"
        yield Slip(text, "sampling", sampled(continuous, time, course))


def _taken_for_continuous(wanted: Target, continuous: LocalModel, time_unit: str) -> Iterator[Slip]:
    for course in COURSES:
        time = _time_of(wanted, continuous, course)
        if time is not None:
            # for straight courses only B, C and D differ from held ones: the same words, so that it is one cause
            text = f"the matrices are those of a discrete model with a sample time of {time:.4g} {time_unit}"
            yield Slip(text, "sampling", sampled(continuous, time, course))


def _time_of(wanted: Target, continuous: LocalModel, course: Course) -> float | None:
    """The sample time that explains the delivered model; None where none does."""
    near = _sample_time(wanted.pair.delivered.A, continuous.A)
    if near is None:
        return None

    def derive(knob: Knob, value: float) -> LocalModel:
        return sampled(continuous, value, course)

    start = sampled(continuous, near, course)
    if wanted.explained(start):
        return near
    return fitted(Knob("sample time", "parameter", near, "", near), derive, wanted, start)


def _sample_time(discrete: Array, continuous: Array) -> float | None:
    """A first guess of the T with exp(A T) = `discrete`, from eigenvalues; None where they say nothing."""
    if not np.isfinite(discrete).all():
        return None
    turns, speeds = np.linalg.eigvals(discrete), np.sort(np.abs(np.linalg.eigvals(continuous)))
    if not len(turns) or np.abs(turns).min() == 0.0:
        return None
    steps = np.sort(np.abs(np.log(turns.astype(np.complex128))))
    told = speeds > 1e-9 * speeds.max()
    ratios = steps[told] / speeds[told]
    # the middle one: fast modes lose their digits in a few steps, slow ones in a rounded file
    return float(np.median(ratios)) if ratios.size and np.median(ratios) > 0.0 else None


def _with(model: LocalModel, step: float, blocks: dict[str, Array]) -> LocalModel:
    made = {name: frozen_array(block) for name, block in blocks.items()}
    return replace(model, step=step, **made)  # type: ignore[arg-type]
