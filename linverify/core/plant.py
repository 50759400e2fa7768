"""What a plant is: names with units, functions, and where those functions are defined at all.

A `Plant` is a frozen value that an engineer writes down once. It never calls its functions; `core.bound` does, and
checks every answer at the border.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any, ClassVar

from .errors import DefinitionError
from .signals import Signals

NAME = re.compile(r"[A-Za-z_][A-Za-z0-9_+.-]*\Z")

# (t, x, u, p) -> rates, outputs, or the four Jacobians; x and u carry drives along their last axis, if any
PlantFunction = Callable[[float, Any, Any, Mapping[str, float]], Any]
Bounds = tuple[float | None, float | None]


@dataclass(frozen=True, eq=False, kw_only=True)
class Plant:
    """The nonlinear model x' = f(t, x, u; p), y = g(t, x, u; p), or x[k+1] = f(k, x[k], u[k]; p) where `step` is given.

    states, inputs, outputs: name -> unit, in array order. dynamics(t, x, u, p) returns the rates of the states in their
    units per `time_unit` (or the next states); measurement(t, x, u, p) the outputs; left out, the outputs are the
    states that `outputs` names, or all of them. parameters: name -> (value, unit), or a bare number without unit.
    nominal: typical size of a deviation, for scaling. domain: where the functions are defined (None: open side).
    jacobian(t, x, u, p) -> A, B, C, D: optional, always cross-checked numerically. step: time units between the
    instants of a difference equation.

    Raises DefinitionError when these do not fit together.
    """

    states: Mapping[str, str]
    inputs: Mapping[str, str]
    dynamics: PlantFunction
    outputs: Mapping[str, str] | None = None
    parameters: Mapping[str, float | tuple[float, str]] = field(default_factory=dict)
    measurement: PlantFunction | None = None
    nominal: Mapping[str, float] = field(default_factory=dict)
    time_unit: str = "s"
    domain: Mapping[str, Bounds] = field(default_factory=dict)
    jacobian: PlantFunction | None = None
    step: float | None = None

    # a loop closed around a plant makes outputs of what it moves, and inputs of the set points of what it measures:
    # there one name may stand for an input and an output, whose trimmed values agree
    names_repeat: ClassVar[bool] = False

    def __post_init__(self) -> None:
        if self.outputs is None:
            if self.measurement is not None:
                raise DefinitionError("a plant with a measurement needs outputs={name: unit}")
            object.__setattr__(self, "outputs", self.states)
        for kind in ("states", "inputs", "outputs"):
            object.__setattr__(self, kind, MappingProxyType(_named_units(kind, getattr(self, kind))))
        object.__setattr__(self, "parameters", MappingProxyType(_parameters(self.parameters)))
        object.__setattr__(self, "nominal", MappingProxyType(dict(self.nominal)))
        object.__setattr__(self, "domain", MappingProxyType(dict(self.domain)))
        _check_functions(self)
        _check_names(self)
        _check_numbers(self)

    @property
    def state_signals(self) -> Signals:
        """States in array order."""
        return Signals.of(self.states)

    @property
    def input_signals(self) -> Signals:
        """Inputs in array order."""
        return Signals.of(self.inputs)

    @property
    def output_signals(self) -> Signals:
        """Outputs in array order."""
        return Signals.of(self.outputs or {})

    def unit(self, name: str) -> str:
        """Unit of a state, input, output or parameter; raises KeyError."""
        for named in (self.states, self.inputs, self.outputs or {}):
            if name in named:
                return named[name]
        return self.parameter(name)[1]

    def parameter(self, name: str) -> tuple[float, str]:
        """Default value and unit of a parameter; raises KeyError."""
        pair = self.parameters[name]
        return pair if isinstance(pair, tuple) else (pair, "")

    @property
    def defaults(self) -> dict[str, float]:
        """Default values of all parameters."""
        return {name: self.parameter(name)[0] for name in self.parameters}


def _named_units(kind: str, named: object) -> dict[str, str]:
    if not isinstance(named, Mapping):
        raise DefinitionError(f"{kind} must map names to units, for example {{'speed': 'm/s'}}; got {named!r}")
    for name, unit in named.items():
        if not isinstance(name, str) or not NAME.match(name):
            raise DefinitionError(
                f"{kind}: {name!r} is no name; names are letters, digits, '_', '-', '+', '.', first a letter or '_'"
            )
        if not isinstance(unit, str):
            raise DefinitionError(f"{kind}: the unit of {name!r} must be a string ('' for none), got {unit!r}")
    return dict(named)


def _parameters(parameters: object) -> dict[str, tuple[float, str]]:
    if not isinstance(parameters, Mapping):
        raise DefinitionError(f"parameters must map names to (value, unit); got {parameters!r}")
    result = {}
    for name, pair in parameters.items():
        value, unit = pair if isinstance(pair, tuple) and len(pair) == 2 else (pair, "")
        if not isinstance(name, str) or not NAME.match(name):
            raise DefinitionError(f"parameters: {name!r} is no name")
        if not _is_number(value) or not isinstance(unit, str):
            raise DefinitionError(f"parameters: {name!r} needs (finite number, 'unit'), got {pair!r}")
        result[name] = (float(value), unit)
    return result


def _is_number(value: object) -> bool:
    if isinstance(value, (bool, str, bytes)):
        return False
    try:
        return math.isfinite(float(value))  # type: ignore[arg-type]
    except (TypeError, ValueError):
        return False


def _check_functions(plant: Plant) -> None:
    if not plant.states:
        raise DefinitionError("a plant needs at least one state")
    for name in ("dynamics", "measurement", "jacobian"):
        function = getattr(plant, name)
        if function is None and name != "dynamics":
            continue
        if not callable(function):
            raise DefinitionError(f"{name} must be a function of (t, x, u, p), got {function!r}")


def _check_names(plant: Plant) -> None:
    outputs = plant.outputs or {}
    if plant.measurement is None and (foreign := [name for name in outputs if name not in plant.states]):
        raise DefinitionError(f"without a measurement every output must be a state; {foreign[0]!r} is none")
    for name in plant.inputs:
        if not plant.names_repeat and (name in plant.states or name in outputs):
            raise DefinitionError(f"{name!r} names an input and a state or output; all share one name space")
    for name in plant.parameters:
        if name in plant.states or name in plant.inputs or name in outputs:
            raise DefinitionError(f"{name!r} names a parameter and a signal; all share one name space")
    for name, unit in outputs.items():
        if name in plant.states and plant.states[name] != unit:
            raise DefinitionError(f"output {name!r} is the state of that name, but its unit {unit!r} differs")
    for kind, mapping in (("nominal", plant.nominal), ("domain", plant.domain)):
        known = {*plant.states, *plant.inputs, *(outputs if kind == "nominal" else ())}
        if foreign := [name for name in mapping if name not in known]:
            raise DefinitionError(f"{kind}: the plant has no signal {foreign[0]!r}")


def _check_numbers(plant: Plant) -> None:
    for name, size in plant.nominal.items():
        if not _is_number(size) or size <= 0:
            raise DefinitionError(f"nominal: {name!r} needs a positive number, got {size!r}")
    for name, bounds in plant.domain.items():
        sides = bounds if isinstance(bounds, tuple) and len(bounds) == 2 else ("?", "?")
        if not all(side is None or _is_number(side) for side in sides):
            raise DefinitionError(f"domain: {name!r} needs (low, high), None for an open side; got {bounds!r}")
        low, high = bounds
        if low is not None and high is not None and low >= high:
            raise DefinitionError(f"domain: {name!r} is empty: {low!r} is not below {high!r}")
    if plant.step is not None and (not _is_number(plant.step) or plant.step <= 0):
        raise DefinitionError(f"step must be a positive number of time units, got {plant.step!r}")
    if not isinstance(plant.time_unit, str) or not plant.time_unit:
        raise DefinitionError(f"time_unit must be a unit of time, got {plant.time_unit!r}")
