"""What is verified at each operating point: a derived model, or the one among the delivered ones that is for it."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from types import MappingProxyType

from linverify.core import units
from linverify.core.case import Band, DriveSet, Setting
from linverify.core.delivered import AgreeAsk, Delays, DeliveredModel, GainsAsk, Keep, LocalAsk, ResponseAsk
from linverify.core.errors import Place
from linverify.core.mode import ModeAsk
from linverify.core.signals import nearest

from .claims import Claim
from .closed import OPEN, Around
from .delivered import bind_delivered
from .ground import Ground, listed, whole_ratio
from .layout import Cell, FileWord, LocalWords, Quantity, ResponseWords, Spec, Word
from .local_words import default_point
from .models import Models, place_of, read_models
from .scalars import quoted

_MOST_TOLD = 8


@dataclass(slots=True)
class LocalModels:
    """Binds `local_models` for one cell after another. Mutable: each file is read once."""

    ground: Ground
    spec: Spec
    root: Path
    delivered: bool = True  # False: files are left unread, as if all models were derived
    keep: Keep | None = None
    agree: AgreeAsk = field(default_factory=AgreeAsk)
    _read: dict[Path, Models] = field(default_factory=dict)
    _files: dict[str, tuple[Path, ...]] = field(default_factory=dict)  # by the file that a model says it is from

    def __post_init__(self) -> None:
        local = self.spec.local
        self.keep = _keep(self.ground, local)
        self.agree = _agree(self.ground, local, Place(self.spec.shown))

    def files_of(self, ask: LocalAsk) -> tuple[Path, ...]:
        """The files that the model of `ask` was read from."""
        return () if ask.delivered is None else self._files[ask.delivered.file]

    def of(self, cell: Cell, asked: Asked, around: Around = OPEN) -> tuple[LocalAsk, tuple[Setting, ...]]:
        """What is verified in `cell`, and the settings that tell where it comes from.

        around: the loops that are closed inside it.
        """
        source = self.spec.local.source
        if source is None or not self.delivered or cell.skipped:
            if self.keep is not None:
                compared = (*self.keep.states, *self.keep.outputs)
                own = replace(asked, moved=(), inside=())  # loops add to what is kept
                self._asked_for(self.keep.inputs, compared, self.keep.states, own, "`keep`")
            return LocalAsk(None, self.keep, self.agree, around.closed), ()
        models = self._models(source, cell)
        claim = self._claim(models, source, cell)
        if claim is None:
            return LocalAsk(None, self.keep, self.agree, around.closed), ()
        ground = replace(
            self.ground,
            more_states={**around.states, **around.waiting},
            more_inputs=around.inputs,
            more_outputs=around.moved,
        )
        model = bind_delivered(ground, claim, around.kept(self.keep), around.optional)
        if model is not None:
            self._fits(model, asked)
        return LocalAsk(model, self.keep, self.agree, around.closed), tuple(self._told(models, cell))

    def _models(self, source: FileWord, cell: Cell) -> Models:
        path, shown = place_of(source, cell.name, self.root)
        if path not in self._read:
            self._read[path] = read_models(source, path, shown)
            self.ground.problems += self._read[path].problems
            for claim in self._read[path].claims.values():
                self._files[claim.file] = self._read[path].files
        return self._read[path]

    def _claim(self, models: Models, source: FileWord, cell: Cell) -> Claim | None:
        """The claim that is for `cell`: by its name where the file has several, else the only one."""
        if not models.claims or models.problems:
            return None
        claim = models.claims.get(cell.name) if models.several else models.claims[""]
        if claim is None:
            wrong = f"{models.shown} has no model for the operating point {quoted(cell.name)}"
            hint = nearest(cell.name, models.claims)
            self.ground.report(cell.place, wrong, f"it has {listed(models.claims)}", hint)
            return None
        if claim.point is not None and claim.point.text != cell.name:
            wrong = f"`point`: this model is for {quoted(claim.point.text)}"
            self.ground.report(claim.point.place, wrong, f"{cell.place} takes it for {quoted(cell.name)}")
            return None
        return claim

    def _told(self, models: Models, cell: Cell) -> Iterator[Setting]:
        yield Setting(
            "local_models.file", models.shown, str(self.spec.local.source.place) if self.spec.local.source else ""
        )
        cells = {each.name for point in self.spec.points for each in point.cells}
        unused = [name for name in models.claims if name and name not in cells]
        if unused and cell.name in models.claims:
            yield Setting("local_models.not used", listed(unused, _MOST_TOLD), models.shown)

    def _fits(self, model: DeliveredModel, asked: Asked) -> None:
        """What drives and bands ask for, the model must have."""
        states = model.states or ()
        self._asked_for(model.inputs, (*states, *model.outputs), states, asked, model.file)
        step = model.step
        if step is None:
            return
        for drives in asked.sets:
            if whole_ratio(drives.every, step) is None:
                time_unit = self.ground.plant.time_unit
                wrong = f"`every`: {units.told(drives.every, time_unit)} is no whole number of sample times"
                expected = f"{model.file} has a sample time of {units.told(step, time_unit)}"
                self.ground.report(drives.place, wrong, expected)

    def _asked_for(
        self,
        inputs: Sequence[str],
        compared: Sequence[str],
        states: Sequence[str],
        asked: Asked,
        where: str,
    ) -> None:
        plant = (*self.ground.states, *self.ground.outputs, *asked.moved)
        self._modes(inputs, compared, states, asked.modes, where)
        for band in asked.bands:
            if band.signal in plant and band.signal not in compared:
                wrong = f"an error band for {quoted(band.signal)}, which the local model does not have"
                self.ground.report(band.place, wrong, _has(where, compared))
        for drives in asked.sets:
            for name, amplitude in drives.amplitude.items():
                point = f"{drives.loop}.set_point.{name}"
                if drives.loop in asked.inside and name not in self.ground.inputs and point not in inputs:
                    wrong = f"the drives move the set point of {quoted(name)}, which is no input of the local model"
                    self.ground.report(drives.place, wrong, _has(where, inputs))
                if name in self.ground.inputs and name not in inputs:
                    wrong = f"the drives move {quoted(name)}, which is no input of the local model"
                    self.ground.report(drives.place, wrong, _has(where, inputs))
                until = amplitude.until[0] if amplitude.until else ""
                if until in plant and until not in compared:
                    wrong = f"an amplitude until {quoted(until)} moves, which the local model does not have"
                    self.ground.report(drives.place, wrong, _has(where, compared))
            for name in drives.offsets:
                if name in self.ground.states and name not in states:
                    wrong = f"an offset of {quoted(name)}, which is no named state of the local model"
                    self.ground.report(drives.place, wrong, _has(where, states))

    def _modes(
        self,
        inputs: Sequence[str],
        compared: Sequence[str],
        states: Sequence[str],
        modes: Sequence[ModeAsk],
        where: str,
    ) -> None:
        """Names in limits on modes that the local model does not have; `at_zero` only counts what it names."""
        for ask in modes:
            named = (
                (
                    inputs,
                    (*(name for name, _ in ask.controllable), *ask.inputs, *(each[0] for each in ask.static_gain)),
                ),
                (
                    compared,
                    (*(name for name, _ in ask.observable), *ask.outputs, *(each[1] for each in ask.static_gain)),
                ),
                (states, tuple(name for name, _ in ask.chosen.participates)),
            )
            for among, names in named:
                for name in dict.fromkeys(names):
                    if name not in among:
                        wrong = f"`modes`: {quoted(name)} is nothing that the local model has"
                        self.ground.report(ask.place, wrong, _has(where, among))


@dataclass(frozen=True, slots=True)
class Asked:
    """What asks for signals of the local model at one point.

    moved: plant inputs that loops inside the model move, so that bands can be for them; inside: names of these loops.
    """

    sets: Sequence[DriveSet]
    bands: Sequence[Band]
    modes: Sequence[ModeAsk]
    moved: Sequence[str] = ()
    inside: Sequence[str] = ()


def _has(where: str, names: Sequence[str]) -> str:
    return f"{where} has {listed(dict.fromkeys(names)) if names else 'none'}"


def _keep(ground: Ground, local: LocalWords) -> Keep | None:
    words = local.keep
    if words is None or local.others is None:
        return None
    kept = {}
    for kind, what in (("states", "a state"), ("inputs", "an input"), ("outputs", "an output")):
        among: Sequence[str] = getattr(ground, kind)
        kept[kind] = _kept(ground, getattr(words, kind), among, what, words.place)
    return Keep(kept["states"], kept["inputs"], kept["outputs"], local.others, words.place)


def _kept(
    ground: Ground, words: tuple[Word, ...] | None, among: Sequence[str], what: str, place: Place
) -> tuple[str, ...]:
    """The kept names in the plant's order."""
    if words is None:
        return tuple(among)
    named = {word.text for word in words if ground.known(word.text, word.place, among, what)}
    if not words and what == "a state":
        ground.report(place, "`keep` lists no state", "at least one is expected")
    return tuple(name for name in among if name in named)


def _agree(ground: Ground, local: LocalWords, place: Place) -> AgreeAsk:
    source = local.source.place if local.source else place
    response = None if local.response is None else _response(ground, local.response)
    gains = None
    if local.gains is not None:
        gains = GainsAsk(local.places.get("agree.gains", source), **local.gains)
    return AgreeAsk(
        point=default_point() if local.point is None else local.point,
        entries=local.entries,
        response=response,
        gains=gains,
        place=local.places.get("agree", source),
        entries_place=local.places.get("agree.entries"),
        point_place=local.places.get("agree.point"),
    )


def _response(ground: Ground, words: ResponseWords) -> ResponseAsk | None:
    called = "local_models: agree: response: between"
    low, high = (ground.frequency(each, called) for each in (words.low, words.high))
    if math.isnan(low) or math.isnan(high):
        return None
    if low <= 0.0 or low >= high:
        wrong = f"`{called}`: {words.low.text} to {words.high.text} is no range of frequencies"
        ground.report(words.high.place, wrong, "0 < low < high is expected")
        return None
    step = ground.plant.step
    if step is not None and high * step > math.pi * (1.0 + 1e-9):
        wrong = f"`{called}`: {words.high.text} is beyond half the sampling frequency of the plant"
        half = units.told(math.pi / step, f"rad/{ground.plant.time_unit}")
        ground.report(words.high.place, wrong, f"at most {half} is expected")
    return ResponseAsk(words.within, low, high, words.floor, words.place)


def bind_delays(ground: Ground, spec: Spec) -> Delays:
    """Dead times by input and output, in the plant's time unit; those of a difference equation are whole steps."""
    bound: dict[str, dict[str, float]] = {"inputs": {}, "outputs": {}}
    for kind, what in (("inputs", "an input"), ("outputs", "an output")):
        for entry in spec.delays.get(kind, ()):
            if not ground.known(entry.name, entry.place, getattr(ground, kind), what):
                continue
            word = f"delays: {kind}: {entry.name}"
            bound[kind][entry.name] = _delay(ground, entry.value, word)
    return Delays(MappingProxyType(bound["inputs"]), MappingProxyType(bound["outputs"]))


def _delay(ground: Ground, quantity: Quantity, word: str) -> float:
    delay, step = ground.time(quantity, word), ground.plant.step
    if step is None or delay == 0.0 or math.isnan(delay):
        return delay
    count = whole_ratio(delay, step)
    if count is None:
        wrong = f"`{word}`: {quantity.text!r} is no whole number of the plant's steps of {ground.told_time(step)}"
        ground.report(quantity.place, wrong, "a multiple of the plant's step is expected")
        return math.nan
    return count * step


def bind_wraps(ground: Ground, spec: Spec) -> tuple[str, ...]:
    """States and outputs that are angles."""
    names = tuple(dict.fromkeys((*ground.states, *ground.outputs)))
    wrapped = []
    for word in spec.wraps:
        if not ground.known(word.text, word.place, names, "a state or output"):
            continue
        unit = ground.plant.unit(word.text)
        if not units.convertible(unit, "rad"):
            wrong = f"`wraps`: {quoted(word.text)} is no angle: the plant has it in {unit or '1'}"
            ground.report(word.place, wrong, "a state or output in rad, deg or rev is expected")
        wrapped.append(word.text)
    return tuple(name for name in names if name in wrapped)
