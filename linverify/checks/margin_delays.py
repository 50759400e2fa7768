"""The delay margin of sampled loops, where a phase over a frequency means nothing."""

from __future__ import annotations

from dataclasses import replace

from ..core.loop import Loop
from ..numerics.closing import Setup, held_alone, opened
from ..numerics.delay_margin import sampled_delay_margin
from ..numerics.delay_scan import first_loss
from ..numerics.loop_margins import Channel, LoopMargins, closed_poles
from ..numerics.margins import Found
from ..numerics.unmoved import split

PARTS = 8.0  # trials a sample, at least
TURN = 0.1  # rad at the highest crossover from one trial to the next, at most
BEYOND = 2.0  # of what is asked for: how far is tried
TRIED = "the delay margin of {} was found by trying dead times every {:.3g} {}"
NO_LOSS = ": none of them loses stability, so it is at least what is told"


def with_delays(setup: Setup, loop: Loop, one: LoopMargins, time_unit: str) -> tuple[LoopMargins, list[str]]:
    """`one` with the delay margins of a sampled loop filled in, and notes on how they were found."""
    if loop.sample is None or not one.stable:
        return one, []
    if (held := held_alone(setup, loop.name)) is not None:
        plant = split(held.plant, held.states).moved
        found = sampled_delay_margin(plant, held.controller, held.delay)
        return _filled(one, [found]), []
    wanted = max((limit.low for limit in loop.require if limit.word == "delay_margin"), default=0.0)
    if wanted <= 0.0:
        return one, []
    steps = [_step(setup, loop, channel) for channel in one.channels]
    tried = [_tried(setup, loop, one, k, step, wanted) for k, step in enumerate(steps)]
    told = [
        TRIED.format(each.name, step, time_unit) + (NO_LOSS if delay.value >= BEYOND * wanted else "")
        for each, step, delay in zip(one.channels, steps, tried, strict=True)
    ]
    return _filled(one, tried), told


def _filled(one: LoopMargins, delays: list[Found]) -> LoopMargins:
    return replace(
        one,
        channels=tuple(
            replace(channel, margins=replace(channel.margins, delay=delay)) if channel.moves else channel
            for channel, delay in zip(one.channels, delays, strict=True)
        ),
    )


def _step(setup: Setup, loop: Loop, channel: Channel) -> float:
    if setup.model.step is not None:
        return setup.model.step
    fastest = max((each.frequency for each in channel.margins.crossovers), default=0.0)
    step = (loop.sample or 1.0) / PARTS
    return min(step, TURN / fastest) if fastest > 0.0 else step


def _tried(setup: Setup, loop: Loop, one: LoopMargins, channel: int, step: float, wanted: float) -> Found:
    count = len(one.channels)

    def stable(extra: float) -> bool:
        more = [extra if k == channel else 0.0 for k in range(count)]
        broken = opened(setup, loop.name, **({"late": more} if one.at_input else {"old": more}))
        whole, states = (
            (broken.plant_input, broken.states_in) if one.at_input else (broken.plant_output, broken.states_out)
        )
        poles = closed_poles(split(whole, states).moved)
        return poles is not None and poles.stable

    return first_loss(stable, step, BEYOND * wanted, whole=setup.model.step is not None)
