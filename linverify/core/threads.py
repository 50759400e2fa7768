"""One thread for the linear algebra libraries, so that the same run gives the same bits everywhere.

The libraries read their variables once, when numpy loads them: the variables are therefore set before that. Where
numpy is there already (a conftest imported it first), the loaded libraries are asked through their own C interface,
which is found in the memory map of the process; other systems than Linux have no such map, and then only the number
"unknown" can be recorded. Imports the standard library only, because it must run before numpy does.
"""

from __future__ import annotations

import ctypes
import os
import re
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

VARIABLES = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")
_LIBRARY = re.compile(r"(openblas|mkl_rt)", re.IGNORECASE)
_SETTERS = (  # the builds of the library prefix and suffix the same two names in several ways
    "scipy_openblas_set_num_threads64_",
    "scipy_openblas_set_num_threads",
    "openblas_set_num_threads64_",
    "openblas_set_num_threads",
    "MKL_Set_Num_Threads",
)
_GETTERS = (
    "scipy_openblas_get_num_threads64_",
    "scipy_openblas_get_num_threads",
    "openblas_get_num_threads64_",
    "openblas_get_num_threads",
    "MKL_Get_Max_Threads",
)


def one_thread() -> str:
    """Ask for one thread, by the variables and, where numpy is loaded, of its libraries; returns how it was done."""
    late = "numpy" in sys.modules
    already = all(os.environ.get(name) == "1" for name in VARIABLES)
    for name in VARIABLES:
        os.environ[name] = "1"
    if not late:
        return "before numpy was loaded"
    changed = [_call(library, _SETTERS, 1) for library in _libraries()]
    if already:
        return "by the environment of the process"
    return "after numpy was loaded, by the library's own call" if any(changed) else "too late: numpy was loaded already"


def threads() -> int | None:
    """The largest number of threads that a loaded library would use; None where nobody can be asked."""
    found = [_call(library, _GETTERS) for library in _libraries()]
    numbers = [number for number in found if isinstance(number, int) and number is not True]
    return max(numbers, default=None)


def told(how: str) -> str:
    """What a record says: the number of threads that are really used, and how it came about."""
    number = threads()
    return f"{'unknown' if number is None else number} ({how})"


def _libraries() -> Iterator[ctypes.CDLL]:
    try:
        lines = Path("/proc/self/maps").read_text(encoding="utf-8", errors="replace").splitlines()
    except OSError:
        return
    paths = {line.split(maxsplit=5)[-1] for line in lines if _LIBRARY.search(line.rpartition("/")[2])}
    for path in sorted(paths):
        try:
            yield ctypes.CDLL(path)
        except OSError:  # a mapped file that is no library
            continue


def _call(library: ctypes.CDLL, names: tuple[str, ...], *arguments: Any) -> int | bool:
    """The answer of the first of `names` that the library has: the number, or whether a setter was there at all."""
    for name in names:
        function = getattr(library, name, None)
        if function is not None:
            answer = function(*arguments)
            return True if arguments else int(answer)
    return False
