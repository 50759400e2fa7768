"""The one road from specs to a verdict and a report, without pytest: specs -> cases -> verdicts -> record -> files.

The pytest plugin makes its verdicts one by one and joins at `conclude`, so both ways write the same record.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType
from typing import Any

from . import provenance
from .checks.evidence import FOLDER, kept, opened
from .checks.judge import judge
from .checks.replay import replayed
from .core.case import Case, CheckAsk, Options
from .core.drive import Drive
from .core.errors import LinverifyError, Problem, RecordError, SpecError
from .core.signals import nearest
from .core.verdict import Verdict
from .report import files, record, tables, text
from .spec.bind import load
from .spec.source import is_spec

PINNED = "pinned"  # folder beside a spec


class SelectionError(LinverifyError):
    """A path, an operating point or a check that was named on the command line is not there."""


@dataclass(frozen=True, slots=True, eq=False)
class Books:
    """What a run was to do and what came of it.

    planned: ids of the checks to be run; one without a verdict becomes a NOT RUN row. points: `record.describe` of
    each operating point; sources: files that the specs were read from; partial: something of the given specs was
    left out; threads: how linear algebra came to one thread; why: reasons, by id, for verdicts that are missing.
    """

    verdicts: tuple[Verdict, ...]
    planned: tuple[str, ...]
    points: tuple[Mapping[str, Any], ...]
    sources: tuple[Path, ...]
    partial: bool
    threads: str = ""
    why: Mapping[str, str] = field(default_factory=lambda: MappingProxyType({}))


@dataclass(frozen=True, slots=True, eq=False)
class Concluded:
    """The record, the files written, the lines for the terminal, and whether the build may go on."""

    record: Mapping[str, Any]
    written: tuple[Path, ...]
    lines: tuple[str, ...]
    passed: bool


def conclude(books: Books, options: Options, root: Path) -> Concluded:
    """Make the record, write the reports, and say how the run went. Raises RecordError for what makes no record.

    Reports that cannot be written take nothing from the verdicts, but the run has not passed.
    """
    made = record.build(
        books.verdicts,
        planned=books.planned,
        points=books.points,
        provenance=provenance.gathered(books.sources, root, options, threads=books.threads),
        partial=books.partial,
        profile=options.profile,
        root=root,
        why=books.why,
    )
    verdicts = record.verdicts_of(made)
    written: tuple[Path, ...] = ()
    unwritten: tuple[str, ...] = ()
    try:
        written = files.write(made, options.reports) if options.reports else ()
    except RecordError as error:
        unwritten = (f"the reports could not be written: {error}",)
    lines = (*_lines(verdicts, written, options, partial=books.partial), *unwritten)
    broken = any(verdict.status.breaks_build for verdict in verdicts)
    return Concluded(made, written, lines, not broken and not unwritten)


def _lines(verdicts: Sequence[Verdict], written: Sequence[Path], options: Options, *, partial: bool) -> tuple[str, ...]:
    """The summary of a run, with where the reports are and the next step."""
    report = next((as_typed(path) for path in written if path.suffix == ".md"), "")
    lines = text.summary(verdicts, profile=options.profile, partial=partial, report=report)
    broken = sorted((verdict for verdict in verdicts if verdict.status.breaks_build), key=tables.severity)
    if options.reports:
        steps = (text.next_steps(verdict, evidence_folder(options.reports)) for verdict in broken)
        lines += next((["next step:", *step] for step in steps if step), [])
    return tuple(lines)


def as_typed(path: Path) -> str:
    """A path as the reader would type it: relative to where they are, if it is below."""
    here = Path.cwd()
    return path.relative_to(here).as_posix() if path.is_relative_to(here) else path.as_posix()


def evidence_folder(reports: Path) -> str:
    """Where saved drives are, as the reader would type it."""
    return as_typed(reports / FOLDER)


def find(paths: Sequence[Path]) -> tuple[Path, ...]:
    """The specs under files and folders, each once, in a fixed order. Raises SelectionError."""
    found: dict[Path, None] = {}
    for path in paths:
        if not path.exists():
            raise SelectionError(f"{as_typed(path)}: no such file or folder")
        if path.is_file() and not is_spec(path):
            raise SelectionError(f"{as_typed(path)}: is no spec; specs are .yaml files other than defaults.yaml")
        below = sorted(path.rglob("*.yaml")) if path.is_dir() else [path]
        found.update(
            (one.resolve(), None) for one in below if is_spec(one) and not _is_aside(one.relative_to(path), path)
        )
    if not found:
        raise SelectionError(f"no spec under {', '.join(map(str, paths))}")
    return tuple(found)


def _is_aside(below: Path, folder: Path) -> bool:
    """True in a hidden folder, an environment or installed packages, where pytest looks for no specs either."""
    parts = below.parts[:-1]
    if any(part.startswith(".") or part == "node_modules" for part in parts):
        return True
    return any((folder.joinpath(*parts[: at + 1]) / "pyvenv.cfg").is_file() for at in range(len(parts)))


def cases_of(specs: Iterable[Path], root: Path, *, delivered: bool = True) -> tuple[Case, ...]:
    """All operating points of all specs. Raises SpecError with the mistakes of all of them.

    delivered: False leaves files of models unread, as if all models were derived.
    """
    cases: list[Case] = []
    problems: list[Problem] = []
    for spec in specs:
        try:
            cases += load(spec, root, delivered=delivered)
        except SpecError as error:
            problems += error.problems
    if problems:
        raise SpecError(problems)
    return tuple(cases)


def check_paths(
    paths: Sequence[Path],
    options: Options,
    root: Path,
    *,
    threads: str = "",
    told: Callable[[Verdict], None] | None = None,
) -> Concluded:
    """Judge everything that the specs under `paths` ask for, and write the reports.

    told: called with each verdict as it is found. Raises SelectionError, SpecError, RecordError and OSError; then
    nothing is written.
    """
    cases = cases_of(find(paths), root)
    verdicts = []
    for case in cases:
        for ask in case.checks:
            verdicts.append(judge(case, ask, options))
            if told:
                told(verdicts[-1])
    books = Books(
        tuple(verdicts),
        tuple(verdict.id for verdict in verdicts),
        tuple(record.describe(case) for case in cases),
        tuple(dict.fromkeys(path for case in cases for path in case.files)),
        partial=False,
        threads=threads,
    )
    return conclude(books, options, root)


def replay(file: Path, item: str | None, options: Options) -> Verdict:
    """Run one saved drive again, on the check that it was saved for or on `item`: its figures against the bands.

    Of `margins`, which keep what became of a kick, the whole check is judged again.

    The same figures as the run quoted, to the last digit. Raises DriveFileError, SelectionError and SpecError.
    """
    drive, case, ask = _saved(file, item, ("follows", "margins"))
    return replayed(case, ask, options, drive, file.name)


def pin(file: Path, item: str | None) -> list[str]:
    """Copy a saved drive beside its spec, where `pinned:` finds it; returns lines on what was done and is to be done.

    Raises DriveFileError, SelectionError, SpecError and OSError.
    """
    _, case, ask = _saved(file, item)
    name = f"{case.spec}::{case.point}::{ask.name}"
    path = kept(file, (root_above(case.spec, file) / case.spec).parent / PINNED, name)
    lines = [f"kept {as_typed(path)}"]
    again, _ = select(name, file)
    if path.resolve() in {one.resolve() for one in again.drive_set(ask.drives).pinned}:
        return [*lines, f"{case.spec} finds it: it is replayed first from now on"]
    where = f"the drives {ask.drives!r}" if ask.drives else "`drives`"
    return [*lines, f"to have it replayed first, write into {where} of {case.spec}:", f'  pinned: "{PINNED}/*.json"']


def _saved(file: Path, item: str | None, kinds: tuple[str, ...] = ("follows",)) -> tuple[Drive, Case, CheckAsk]:
    drive, own = opened(file)
    name = item or own
    if not name:
        raise SelectionError(f"{file} does not say which check it belongs to; name it: SPEC::POINT::CHECK")
    case, ask = select(name, file)
    if ask.kind not in kinds:
        raise SelectionError(f"{name} drives nothing; a drive belongs to a check `follows`")
    return drive, case, ask


def select(item: str, near: Path | None = None) -> tuple[Case, CheckAsk]:
    """The check with the id `SPEC::POINT::CHECK`, from the current folder or one above, else from those above `near`.

    Raises SelectionError, with the nearest right word, and SpecError.
    """
    parts = item.split("::")
    if len(parts) != 3:
        raise SelectionError(f"a check is named SPEC::POINT::CHECK, got {item!r}")
    (case,) = points(Path(parts[0]), parts[1], near)
    for ask in case.checks:
        if ask.name == parts[2]:
            return case, ask
    raise SelectionError(_missing("check", parts[2], [ask.name for ask in case.checks], f"{parts[0]}::{parts[1]}"))


def points(
    spec: Path, name: str | None = None, near: Path | None = None, *, delivered: bool = True
) -> tuple[Case, ...]:
    """The operating points of a spec, or the one called `name`. Raises SelectionError and SpecError."""
    root = root_above(spec, near)
    cases = cases_of(find([root / spec]), root, delivered=delivered)
    named = cases if name is None else tuple(case for case in cases if case.point == name)
    if name is not None and not named:
        raise SelectionError(_missing("operating point", name, [case.point for case in cases], str(spec)))
    return named


def root_above(spec: Path | str, near: Path | None = None) -> Path:
    """The folder that the path of a spec is relative to: the current one, or the nearest one above where it exists.

    near: a file, as a rule evidence under the root folder, above which is looked next: commands work from anywhere.
    """
    here = Path.cwd()
    places = (here, *here.parents, *(near.absolute().parents if near else ()))
    return next((folder for folder in places if (folder / spec).is_file()), here)


def effective(case: Case) -> list[str]:
    """The effective spec of one operating point: every word, its value, and where it comes from."""
    width = max((len(item.word) for item in case.settings), default=0)
    wide = max((len(item.text) for item in case.settings), default=0)
    lines = [f"{item.word:<{width}}  {item.text:<{wide}}  {item.origin}" for item in case.settings]
    return [f"{case.spec}::{case.point}", *lines]


def _missing(kind: str, name: str, names: Sequence[str], where: str) -> str:
    near = nearest(name, names)
    return f"{where} has no {kind} {name!r}; " + (f"did you mean {near!r}?" if near else f"it has {', '.join(names)}")
