"""Python objects that a spec names, `FILE:OBJECT` or `package.module:OBJECT`: its plant, and controllers.

Only here does reading a spec run user code.

A plant file is executed under a module name of its own, once a process and content: two specs that name two different
`plant.py` do not meet, and several specs of one file share it. While it runs, its folder comes first on the import
path, and modules of the same name from elsewhere are put aside, so that it finds its own neighbours and later plants
do not find them. It is compiled from its text, not from a bytecode cache: such a cache is told from its source by
seconds and size, and a stale plant would be judged in place of the one that is there.
"""

from __future__ import annotations

import hashlib
import importlib
import importlib.util
import sys
import traceback
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType, ModuleType
from typing import Any

from linverify.core.errors import Problem
from linverify.core.plant import Plant
from linverify.core.signals import nearest

from .layout import PlantRef

# what a file may raise while it is executed; SystemExit is what a script without a guard ends with
_ANY = (Exception, SystemExit)


@dataclass(frozen=True, slots=True)
class Loaded:
    """A plant with the files that it was made from: its own and the neighbours that it imported."""

    plant: Plant
    files: tuple[Path, ...]


@dataclass(frozen=True, slots=True)
class _Module:
    """What came of running a plant file: its names, or why it has none."""

    names: Mapping[str, Any]
    files: tuple[Path, ...]
    wrong: str = ""


_MODULES: dict[tuple[Path, str], _Module] = {}


@dataclass(frozen=True, slots=True)
class Found:
    """A Python object that a spec names, with the files that it was made from."""

    value: Any
    files: tuple[Path, ...]


def load_plant(ref: PlantRef, root: Path) -> Loaded | Problem:
    """Import what `ref` names; `root` comes last on the import path for `package.module:OBJECT`.

    A file that is missing or does not run, a missing object and an object that is no Plant are Problems at `ref.place`.
    """
    module = _module(ref, root)
    if isinstance(module, Problem):
        return module
    plants = [name for name, value in module.names.items() if isinstance(value, Plant)]
    where = _where(ref)
    expected = f"{where} holds {', '.join(plants)}" if plants else f"{where} holds no plant"
    found = _object(ref, module, "a Plant is expected", expected, plants)
    if isinstance(found, Problem):
        return found
    if isinstance(found.value, Plant):
        return Loaded(found.value, found.files)
    article = f"a {type(found.value).__name__}" if not isinstance(found.value, type) else "a class"
    wrong = f"{ref.object!r} in {where} is {article}, no Plant"
    return Problem(ref.place, wrong, expected, nearest(ref.object, plants))


def load_object(ref: PlantRef, root: Path) -> Found | Problem:
    """Import any object that `ref` names; what is missing or does not run is a Problem at `ref.place`."""
    module = _module(ref, root)
    if isinstance(module, Problem):
        return module
    names = [name for name in module.names if not name.startswith("_")]
    return _object(ref, module, "a controller is expected", "the name of an object in it is expected", names)


def called(function: Callable[..., Any], *arguments: Any) -> Any:
    """What `function` returns, or a `Raised` with the line of its file."""
    try:
        return function(*arguments)
    except _ANY as error:
        code = getattr(function, "__code__", None)
        return Raised(_told_at(error, Path(code.co_filename)) if code else f"raised {_told(error)}")


class Raised(str):
    """The text of an exception that user code raised."""

    __slots__ = ()


def _where(ref: PlantRef) -> str:
    return ref.file or ref.module


def _module(ref: PlantRef, root: Path) -> _Module | Problem:
    if ref.file:
        path = (ref.folder / ref.file).resolve()
        if not path.is_file():
            hint = nearest(ref.file, sorted(file.name for file in ref.folder.glob("*.py")))
            wrong = f"there is no file {ref.file!r}"
            return Problem(ref.place, wrong, "a path relative to this file is expected", hint)
        module = _run_file(path, ref.file)
    else:
        module = _import_module(ref.module, root)
    return Problem(ref.place, module.wrong) if module.wrong else module


def _object(ref: PlantRef, module: _Module, what: str, there: str, names: Sequence[str]) -> Found | Problem:
    """what: is due; there: what the module holds, by `names` that a misspelt one is compared with."""
    where = _where(ref)
    value: Any = None
    for depth, name in enumerate(ref.object.split(".")):
        try:
            value = module.names[name] if depth == 0 else getattr(value, name)
        except (KeyError, AttributeError):
            return Problem(ref.place, f"{where} has no {ref.object!r}", there, nearest(ref.object, names))
        except _ANY as error:
            return Problem(ref.place, f"{ref.object!r} in {where} raised {_told(error)}", what)
    return Found(value, module.files)


def _run_file(path: Path, shown: str) -> _Module:
    try:
        source = path.read_bytes()
    except OSError as error:
        return _Module({}, (), f"{shown} cannot be read: {error.strerror}")
    key = (path, hashlib.sha256(source).hexdigest())
    if key not in _MODULES:
        _MODULES[key] = _executed(path, source, f"linverify_plant_{_digest(path)}_{key[1][:12]}")
    module = _MODULES[key]
    return _Module(module.names, module.files, module.wrong and f"{shown} {module.wrong}")


def _digest(path: Path) -> str:
    return hashlib.sha256(str(path).encode()).hexdigest()[:12]


def _executed(path: Path, source: bytes, name: str) -> _Module:
    module = ModuleType(name)
    module.__file__ = str(path)
    module.__spec__ = importlib.util.spec_from_file_location(name, path)
    sys.modules[name] = module  # dataclasses and pickle look a class's module up there
    with _neighbours(path.parent) as files:
        try:
            exec(compile(source, str(path), "exec", dont_inherit=True), module.__dict__)  # the spec names this file
        except _ANY as error:
            del sys.modules[name]
            return _Module({}, (), _told_at(error, path))
    return _Module(MappingProxyType(module.__dict__), (path, *files))


@contextmanager
def _neighbours(folder: Path) -> Iterator[list[Path]]:
    """Let imports find the modules of `folder` first; afterwards they are gone again, and their files are listed."""
    files: list[Path] = []
    names = {file.stem for file in folder.glob("*.py")} | {file.parent.name for file in folder.glob("*/*.py")}
    names -= set(sys.stdlib_module_names)
    own = {name for name in names if _lies_in(sys.modules.get(name), folder)}  # a package that is in use already
    names -= own
    aside = {name: module for name, module in sys.modules.items() if name.partition(".")[0] in names}
    for name in aside:
        del sys.modules[name]
    sys.path.insert(0, str(folder))
    importlib.invalidate_caches()
    try:
        yield files
    finally:
        if str(folder) in sys.path:  # the plant file may have put its own hands on the path
            sys.path.remove(str(folder))
        found = [name for name in sys.modules if name.partition(".")[0] in names]
        files.extend(sorted(Path(file) for name in found if (file := getattr(sys.modules[name], "__file__", None))))
        for name in found:
            del sys.modules[name]
        sys.modules.update(aside)


def _lies_in(module: ModuleType | None, folder: Path) -> bool:
    file = getattr(module, "__file__", None)
    return file is not None and folder in Path(file).resolve().parents


def _import_module(name: str, root: Path) -> _Module:
    sys.path.append(str(root))
    try:
        module = importlib.import_module(name)
    except ModuleNotFoundError as error:
        if error.name is not None and (name == error.name or name.startswith(f"{error.name}.")):
            return _Module({}, (), f"there is no module {error.name!r}")
        return _Module({}, (), f"module {name} raised {_told(error)}")
    except _ANY as error:
        return _Module({}, (), f"module {name} raised {_told(error)}")
    finally:
        sys.path.remove(str(root))
    file = getattr(module, "__file__", None)
    return _Module(MappingProxyType(module.__dict__), (Path(file),) if file else ())


def _told(error: BaseException) -> str:
    text = " ".join(str(error).split())
    return f"{type(error).__name__}: {text}" if text else type(error).__name__


def _told_at(error: BaseException, path: Path) -> str:
    """The exception with the line of the plant's file that led to it."""
    if isinstance(error, SyntaxError) and error.filename == str(path):
        return f"line {error.lineno} is no Python: {error.msg}"
    lines = [frame.lineno for frame in traceback.extract_tb(error.__traceback__) if frame.filename == str(path)]
    return f"line {lines[-1]} raised {_told(error)}" if lines else f"raised {_told(error)}"
