"""The loop transfer function of a declared loop at the point where it is broken, from a local model.

What the loop sees is the local model with actuators' lags in front of its inputs and the loops inside it closed. A
sampled loop sees all that at its instants (`held_loop`). Dead times stay exact: of a continuous loop as one factor
exp(-s delay), which needs every path around the loop to have the same; of a sampled loop in states. What has no exact
answer is refused with the reason, and never approximated.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..core.delivered import Delays
from ..core.loop import Actuator, Loop
from ..core.model import Array, LocalModel
from .held_loop import Sampled, seen
from .interconnect import Block, IllPosedError, Wire, connected
from .transfer import Transfer
from .wiring import ordered

SAME = 1e-12  # relative: two dead times that near are one


class RefusedError(ValueError):
    """There is no exact loop transfer function; the text says why."""


@dataclass(frozen=True, slots=True, eq=False)
class Setup:
    """What loops are closed around.

    model: the local model; loops: all that are declared, by name; actuators: by plant input; delays: dead times of the
    plant; closed: loops that `model` has inside already, the names of their set points being those of the signals;
    also: loops that are closed inside every other one; tick: step of a plant that is a difference equation.
    """

    model: LocalModel
    loops: Mapping[str, Loop]
    actuators: Mapping[str, Actuator]
    delays: Delays
    closed: tuple[str, ...] = ()
    also: tuple[str, ...] = ()
    tick: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Opened:
    """A loop broken open: K G at the plant's input, G K at its output (m by m and k by k), closed by u = -y.

    Of a sampled loop both count in samples. states_in, states_out: names of the states of each; inside: the loops that
    are closed inside. plant, controller: G, with the dead time around the loop, and K.
    """

    plant_input: Transfer
    plant_output: Transfer
    states_in: tuple[str, ...]
    states_out: tuple[str, ...]
    inside: tuple[str, ...]
    plant: Transfer
    controller: Transfer


@dataclass(frozen=True, slots=True, eq=False)
class Held:
    """One sampled channel around a continuous plant: the plant behind its hold, the controller, all dead time around.

    states: names of the plant's.
    """

    plant: Transfer
    controller: Transfer
    delay: float
    states: tuple[str, ...]


def opened(setup: Setup, name: str, *, late: Sequence[float] = (), old: Sequence[float] = ()) -> Opened:
    """The loop `name` of `setup` broken open.

    late, old: of a sampled loop, dead times in addition to what is declared, of what it moves and of what it measures.

    Raises RefusedError with the reason where that cannot be done exactly, KeyError for a loop that is not declared.
    """
    loop = setup.loops[name]
    inside = _inside(setup, name)
    _check(setup, loop, inside)
    try:
        plant, delay = _seen(setup, loop, inside, late, old)
        forward, back = _around(loop, plant)
    except IllPosedError as error:
        raise RefusedError(str(error)) from None
    step = loop.sample
    names = _channels(loop)
    return Opened(
        Transfer(forward.A, forward.B, forward.C, forward.D, delay, step, names, names),
        Transfer(back.A, back.B, back.C, back.D, delay, step, loop.measures, loop.measures),
        forward.states, back.states, tuple(one.name for one in inside),
        Transfer(plant.A, plant.B, plant.C, plant.D, delay, step, names, loop.measures),
        _transfer(loop, names),
    )  # fmt: skip


def _transfer(loop: Loop, names: tuple[str, ...]) -> Transfer:
    one = loop.controller
    return Transfer(one.A, one.B, one.C, one.D, 0.0, loop.sample, loop.measures, names)


def _channels(loop: Loop) -> tuple[str, ...]:
    return tuple(str(moved) for moved in loop.moves)


def _inside(setup: Setup, name: str) -> tuple[Loop, ...]:
    """The loops that are closed inside, outer before inner; without what the model has inside already."""
    found: list[str] = []

    def visit(at: str, way: tuple[str, ...]) -> None:
        loop = setup.loops[at]
        for other in (*loop.within, *(moved.loop for moved in loop.moves if moved.loop)):
            if other in way:
                raise RefusedError(f"loop {other} would be closed inside itself")
            if other not in setup.closed and other not in found:
                found.append(other)
                visit(other, (*way, other))

    visit(name, (name,))
    for other in setup.also:
        if other != name and other not in found:
            found.append(other)
            visit(other, (name, other))
    try:
        return ordered(setup.loops[other] for other in found)
    except ValueError as error:
        raise RefusedError(str(error)) from None


def _check(setup: Setup, loop: Loop, inside: Sequence[Loop]) -> None:
    for one in (loop, *inside):
        _check_signals(setup, one)
    if loop.sample is None and (sampled := [one.name for one in inside if one.sample is not None]):
        wrong = f"a continuous loop around the sampled loop {sampled[0]} has no transfer function"
        raise RefusedError(f"{wrong}: give it a `sample` that fits, or leave {sampled[0]} out of its `with`")
    if setup.model.step is not None:
        _check_steps(setup, (loop, *inside), setup.model.step)
    for one in inside:
        if one.sample is None and (why := _late(setup, one)):
            raise RefusedError(f"{why} lies inside loop {one.name}, which is closed")
    for other in (setup.loops[closed] for closed in setup.closed):
        if other.sample is None and (why := _late(setup, other)):
            raise RefusedError(f"{why} lies inside loop {other.name}, which is closed in the local model")


def _check_steps(setup: Setup, loops: Sequence[Loop], step: float) -> None:
    model = setup.model
    if model.course == "straight":
        raise RefusedError("the local model is sampled for inputs in straight lines, and a loop does not move in such")
    if continuous := [one.name for one in loops if one.sample is None]:
        whose = "the plant is" if setup.tick is not None else "the local model is"
        raise RefusedError(f"loop {continuous[0]} is continuous, and {whose} a difference equation every {step:.6g}")
    if setup.tick is None and (slow := _lagged(setup)):
        raise RefusedError(f"the local model is sampled for held inputs, and behind its lag {slow[0]} is not held")


def _check_signals(setup: Setup, loop: Loop) -> None:
    model = setup.model
    for word, names in (("measures", loop.measures), ("moves", _channels(loop))):
        if twice := [name for name in names if names.count(name) > 1]:
            raise RefusedError(f"loop {loop.name} {word} {twice[0]} twice")
    for name in loop.measures:
        if name not in model.outputs and (model.anonymous or name not in model.states):
            raise RefusedError(f"loop {loop.name} measures {name}, which the local model does not have")
    for moved in loop.moves:
        if not moved.loop and moved.name not in model.inputs:
            raise RefusedError(f"loop {loop.name} moves {moved}, which the local model does not have")
        if moved.loop in setup.closed and str(moved) not in model.inputs:
            raise RefusedError(f"loop {loop.name} moves {moved}, which is no input of the local model")


def _late(setup: Setup, loop: Loop) -> str:
    """Words on a dead time within the loop; empty where there is none."""
    if loop.delay:
        return "the dead time of the loop"
    for moved in loop.moves:
        if not moved.loop and setup.delays.inputs.get(moved.name):
            return f"the dead time of {moved.name}"
    return next((f"the dead time of {name}" for name in loop.measures if setup.delays.outputs.get(name)), "")


def _lagged(setup: Setup) -> list[str]:
    """Inputs of the local model with an actuator in front that lags; those of loops inside the model have it inside."""
    inside = {moved.name for name in setup.closed for moved in setup.loops[name].moves if not moved.loop}
    names = [name for name, one in setup.actuators.items() if one.lag > 0.0 and name in setup.model.inputs]
    return [name for name in names if name not in inside]


def _seen(
    setup: Setup, loop: Loop, inside: Sequence[Loop], late: Sequence[float] = (), old: Sequence[float] = (),
    looks: Sequence[float] = (),
) -> tuple[Block, float]:  # fmt: skip
    """What the loop sees from what it moves to what it measures, and the dead time around a continuous loop."""
    continuous = [one for one in inside if one.sample is None]
    body = _body(setup, (loop, *inside), continuous)
    if loop.sample is None:
        found = body.picked(_channels(loop), loop.measures)
        return found, _dead_time(setup, loop, found)
    sampled = [_sampled(setup, one) for one in inside if one.sample is not None]
    try:
        outer = _later(_sampled(setup, loop), late, old)
        return seen(body, outer, sampled, setup.model.step, looks), 0.0
    except ValueError as error:
        raise RefusedError(str(error)) from None


def _body(setup: Setup, reading: Sequence[Loop], closed: Sequence[Loop]) -> Block:
    """The local model behind its actuators with continuous loops closed: all inputs, and what loops measure."""
    blocks = [_plant(setup, reading)]
    wires = []
    for name in _lagged(setup):
        blocks.append(_actuator(name, setup.actuators[name].lag, setup.model.step))
        wires.append(Wire(f"{name} behind its actuator", f"{name} at the plant"))
    for loop in closed:
        blocks.append(_controller(loop))
        wires += [Wire(name, f"{loop.name}.set_point.{name}", -1.0) for name in loop.measures]
        wires += [Wire(f"{loop.name}.{j + 1}", target) for j, target in enumerate(_channels(loop))]
    return connected(blocks, wires)


def _plant(setup: Setup, reading: Sequence[Loop]) -> Block:
    model = setup.model
    names = tuple(dict.fromkeys(name for loop in reading for name in loop.measures))
    C, D = np.zeros((len(names), len(model.states))), np.zeros((len(names), len(model.inputs)))
    for row, name in enumerate(names):
        if name in model.outputs:  # before the state of that name: it is what the model says of the signal
            C[row], D[row] = model.C[model.outputs.index(name)], model.D[model.outputs.index(name)]
        else:
            C[row, model.states.index(name)] = 1.0
    lagged = _lagged(setup)
    inputs = tuple(f"{name} at the plant" if name in lagged else name for name in model.inputs.names)
    states = tuple(f"state {k + 1}" for k in range(len(model.states))) if model.anonymous else model.states.names
    return Block(model.A, model.B, C, D, states, inputs, names)


def _actuator(name: str, lag: float, step: float | None) -> Block:
    """1 / (lag s + 1); of a difference equation at its instants, exact for a command held between them."""
    rate = np.array([[1.0 / lag]])
    A, B = (-rate, rate) if step is None else (np.exp(-rate * step), -np.expm1(-rate * step))
    return Block(A, B, np.eye(1), np.zeros((1, 1)), (f"{name}.lag",), (name,), (f"{name} behind its actuator",))


def _controller(loop: Loop) -> Block:
    """Inputs: set points, from which measurements are taken off; outputs LOOP.1, LOOP.2, ..."""
    one = loop.controller
    states = tuple(f"{loop.name}.{k + 1}" for k in range(len(one.A)))
    inputs = tuple(f"{loop.name}.set_point.{name}" for name in loop.measures)
    return Block(one.A, one.B, one.C, one.D, states, inputs, tuple(f"{loop.name}.{j + 1}" for j in range(len(one.C))))


def followed(setup: Setup, name: str, looks: Sequence[float] = ()) -> Block:
    """From the set points of the loop to what it measures, closed: of a sampled loop by its samples and at `looks`.

    Inputs are called `LOOP.set_point.NAME`; looks: times within a sample, see `held_loop.seen`. Of a continuous loop
    all dead time around it is left out. Raises as `opened` does.
    """
    loop = setup.loops[name]
    inside = _inside(setup, name)
    _check(setup, loop, inside)
    try:
        plant, _ = _seen(setup, loop, inside, looks=looks)
        controller = _controller(loop)
        wires = [Wire(source, target) for source, target in zip(controller.outputs, plant.inputs, strict=True)]
        wires += [Wire(source, f"{name}.set_point.{source}", -1.0) for source in loop.measures]
        return connected([plant, controller], wires).picked(controller.inputs, plant.outputs)
    except IllPosedError as error:
        raise RefusedError(str(error)) from None


def held_alone(setup: Setup, name: str) -> Held | None:
    """The loop as a continuous plant behind one hold; None where it is anything else. Raises as `opened` does."""
    loop = setup.loops[name]
    inside = _inside(setup, name)
    _check(setup, loop, inside)
    one = len(loop.moves) == len(loop.measures) == 1 and all(other.sample is None for other in inside)
    if not one or loop.sample is None or setup.model.step is not None:
        return None
    try:
        plant = _body(setup, (loop, *inside), inside).picked(_channels(loop), loop.measures)
    except IllPosedError as error:
        raise RefusedError(str(error)) from None
    around = _sampled(setup, loop)
    names = _channels(loop)
    return Held(
        Transfer(plant.A, plant.B, plant.C, plant.D, 0.0, None, names, loop.measures), _transfer(loop, names),
        around.late[0] + around.old[0], plant.states,
    )  # fmt: skip


def _later(loop: Sampled, late: Sequence[float], old: Sequence[float]) -> Sampled:
    """With additional dead times."""
    return replace(
        loop,
        late=tuple(a + b for a, b in zip(loop.late, late, strict=True)) if late else loop.late,
        old=tuple(a + b for a, b in zip(loop.old, old, strict=True)) if old else loop.old,
    )


def _sampled(setup: Setup, loop: Loop) -> Sampled:
    late = tuple(loop.delay + (0.0 if moved.loop else setup.delays.inputs.get(moved.name, 0.0)) for moved in loop.moves)
    old = tuple(setup.delays.outputs.get(name, 0.0) for name in loop.measures)
    return Sampled(loop.name, loop.sample or 0.0, _controller(loop), loop.measures, _channels(loop), late, old)


def _dead_time(setup: Setup, loop: Loop, plant: Block) -> float:
    """Around the loop, the same on every path. Raises RefusedError where it is not."""
    paths = _paths(plant)
    gives = _paths(_controller(loop))  # (moved, measured)
    found: dict[float, str] = {}
    for i, measured in enumerate(loop.measures):
        for k, moved in enumerate(loop.moves):
            if paths[i, k] and gives[:, i].any() and gives[k].any():
                late = 0.0 if moved.loop else setup.delays.inputs.get(moved.name, 0.0)
                total = loop.delay + late + setup.delays.outputs.get(measured, 0.0)
                found.setdefault(total, f"{total:.6g} from {moved} to {measured}")
    if not found:
        return 0.0
    if max(found) - min(found) > SAME * max(found):
        raise RefusedError("paths around the loop have different dead times: " + ", ".join(found.values()))
    return max(found)


def _paths(block: Block) -> Array:
    """Which inputs reach which outputs at all, by entries that are not zero; (k, m) of truth values."""
    A = block.A != 0
    reached = block.B != 0
    while True:
        further = reached | ((A.astype(int) @ reached.astype(int)) > 0)
        if (further == reached).all():
            break
        reached = further
    found = (block.D != 0) | (((block.C != 0).astype(int) @ reached.astype(int)) > 0)
    return np.asarray(found)


def _around(loop: Loop, plant: Block) -> tuple[Block, Block]:
    """K G and G K."""
    controller = _controller(loop)
    outputs, inputs = controller.outputs, controller.inputs
    forth = [Wire(name, target) for name, target in zip(plant.outputs, inputs, strict=True)]
    back = [Wire(name, target) for name, target in zip(outputs, plant.inputs, strict=True)]
    blocks = [plant, controller]
    return connected(blocks, forth).picked(plant.inputs, outputs), connected(blocks, back).picked(inputs, plant.outputs)
