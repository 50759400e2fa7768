"""The command line: reads arguments and prints. What is computed is computed in `run`.

Exit status: 0 everything asked for was shown; 1 something was not; 2 the question itself was wrong (a mistake in a
spec, a missing file), told in one message.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Callable, Sequence
from contextlib import redirect_stdout
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

from . import __version__
from .core.errors import LinverifyError, RecordError
from .core.heard import Heard
from .core.threads import one_thread
from .report.folder import refusal

if TYPE_CHECKING:
    from .core.case import Options
    from .core.verdict import Figure, Verdict

ROOT_MARKS = ("pyproject.toml", "pytest.ini", "tox.ini", "setup.cfg", ".git")


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command; returns the exit status. Mistakes of the user are one message, never a traceback."""
    given = _parser().parse_args(arguments)
    given.out, heard = sys.stdout, Heard()
    threads = one_thread()  # before anything imports numpy
    try:
        with redirect_stdout(heard):
            return int(given.command(given, threads))
    except LinverifyError as error:
        print(error, file=sys.stderr)
    except BrokenPipeError:  # the reader of our output has gone (`| head`): nothing can be told any more
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    except OSError as error:
        print(f"{error.filename or 'a file'}: {error.strerror or error}", file=sys.stderr)
    except KeyboardInterrupt:
        print("interrupted; no report was written", file=sys.stderr)
    finally:
        if heard.told:
            print(heard.told, file=sys.stderr)
    return 2


def _say(given: argparse.Namespace, *lines: str) -> None:
    """Print to the terminal, whatever the plants print meanwhile."""
    print("\n".join(lines), file=given.out, flush=True)


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(prog="linverify", description="Linear models against their nonlinear plants.")
    parser.add_argument("--version", action="version", version=f"linverify {__version__}")
    commands = parser.add_subparsers(required=True, metavar="COMMAND")

    check = commands.add_parser("check", help="judge everything that specs ask for, and write the reports")
    check.add_argument("paths", nargs="+", type=Path, metavar="PATH", help="a spec, or a folder of specs")
    check.set_defaults(command=_check)

    replay = commands.add_parser("replay", help="run one saved drive again: its figures against the bands")
    replay.set_defaults(command=_replay)
    pin = commands.add_parser("pin", help="keep a saved drive beside its spec, to be replayed first for ever after")
    pin.set_defaults(command=_pin)
    for command in (replay, pin):
        command.add_argument("item", nargs="?", metavar="CHECK", help="SPEC::POINT::CHECK; default: as saved in FILE")
        command.add_argument("file", type=Path, metavar="FILE", help="a drive file, as in reports/evidence/")

    explain = commands.add_parser("explain", help="print the effective spec, with where each value comes from")
    explain.add_argument("spec", type=Path, metavar="SPEC")
    explain.add_argument("point", nargs="?", metavar="POINT", help="one operating point; default: all of them")
    explain.set_defaults(command=_explain)

    schema = commands.add_parser("schema", help="print a JSON Schema of specs, for completion in editors")
    schema.set_defaults(command=_schema)

    derive = commands.add_parser("derive", help="write the local models that are derived here to files")
    derive.add_argument("spec", type=Path, metavar="SPEC")
    derive.add_argument("point", nargs="?", metavar="POINT", help="one operating point; default: all of them")
    derive.add_argument(
        "--to",
        required=True,
        metavar="FILE",
        help='.json, .csv, .npz or .mat, or a folder of .csv; "models/{point}.json" makes a file a point',
    )
    derive.add_argument("--force", action="store_true", help="replace files that are there already")
    derive.set_defaults(command=_derive)

    for command in (check, replay):
        command.add_argument("--seed", type=_seed, default=0, metavar="N", help="seed of the drives (default: 0)")
        command.add_argument(
            "--profile", choices=("full", "quick"), default="full", help="quick: fewer drives, not for acceptance"
        )
    check.add_argument(
        "--reports", type=Path, metavar="DIR", help="folder for the reports (default: reports/ under the root folder)"
    )
    return parser


def _seed(text: str) -> int:
    if not text.isdecimal() or int(text) >= 2**63:
        raise argparse.ArgumentTypeError(f"a seed is a whole number from 0 to {2**63 - 1}, got {text!r}")
    return int(text)


def _check(given: argparse.Namespace, threads: str) -> int:
    from . import run

    root = root_of(given.paths)
    options = _options(given, root)
    if options.reports and (refused := refusal(options.reports)):
        raise RecordError(refused)
    result = run.check_paths(given.paths, options, root, threads=threads, told=_teller(given, options))
    _say(given, "", *result.lines)
    return 0 if result.passed else 1


def _teller(given: argparse.Namespace, options: Options) -> Callable[[Verdict], None]:
    """What shows each verdict as soon as it is known: a line for a pass, the whole text for everything else."""
    from . import run
    from .report.text import failure

    evidence = run.evidence_folder(options.reports) if options.reports else ""

    def tell(verdict: Verdict) -> None:
        told = failure(verdict, evidence=evidence) if verdict.status.breaks_build else f"{verdict.id}: {verdict.status}"
        _say(given, told)

    return tell


def _named(figure: Figure) -> str:
    return f"{figure.what} of {figure.signal}" if figure.signal else figure.what


def _replay(given: argparse.Namespace, threads: str) -> int:
    from . import run
    from .report.quantity import exactly
    from .report.text import failure

    verdict = run.replay(given.file, given.item, _options(given, None))
    drive = [f"drive: {one.text}" for one in verdict.evidence]
    exact = [f"to the last digit: {_named(figure)} {exactly(figure.worst, figure.unit)}" for figure in verdict.figures]
    # without evidence there is no replay command in the text: this is the replay
    _say(given, failure(replace(verdict, evidence=(), notes=(*drive, *verdict.notes, *exact))))
    return 1 if verdict.status.breaks_build else 0


def _pin(given: argparse.Namespace, threads: str) -> int:
    from . import run

    _say(given, *run.pin(given.file, given.item))
    return 0


def _explain(given: argparse.Namespace, threads: str) -> int:
    from . import run

    cases = run.points(given.spec, given.point)
    _say(given, "\n\n".join("\n".join(run.effective(case)) for case in cases))
    return 0


def _schema(given: argparse.Namespace, threads: str) -> int:
    import json

    from .spec.schema import schema

    _say(given, json.dumps(schema(), indent=1, sort_keys=True))
    return 0


def _derive(given: argparse.Namespace, threads: str) -> int:
    from . import run
    from .core.case import Options
    from .derive import derive

    made = derive(run.points(given.spec, given.point, delivered=False), given.to, Options(), force=given.force)
    for path in made.written:
        _say(given, f"wrote {run.as_typed(path)}")
    if made.failed:
        print("\n".join((*made.failed, "nothing was written")), file=sys.stderr)
    return 1 if made.failed else 0


def _options(given: argparse.Namespace, root: Path | None) -> Options:
    from .core.case import Options

    if root is None:
        return Options(given.seed, given.profile, None)
    return Options(given.seed, given.profile, (given.reports or root / "reports").absolute())


def root_of(paths: Sequence[Path]) -> Path:
    """The folder that ids are relative to: the nearest one above all `paths` that a project's mark stands in.

    Without any mark, the current folder where it holds the paths, else the folder that they share.
    """
    places = [path.absolute() if path.is_dir() else path.absolute().parent for path in paths]
    shared = Path(os.path.commonpath(places))
    for folder in (shared, *shared.parents):
        if any((folder / mark).exists() for mark in ROOT_MARKS):
            return folder
    return Path.cwd() if shared.is_relative_to(Path.cwd()) else shared
