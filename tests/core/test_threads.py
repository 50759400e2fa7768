"""One thread for linear algebra: set before numpy where possible, asked of the library where not."""

from __future__ import annotations

import os
import subprocess
import sys

import pytest

from linverify.core.threads import VARIABLES

CODE = """
import os, sys
from linverify.core.threads import one_thread, threads, told
{first}
how = one_thread()
import numpy
print(told(how), [os.environ[name] for name in {variables!r}])
"""


@pytest.mark.parametrize(
    "first, set_before, expected",
    [
        ("", "", "1 (before numpy was loaded)"),
        ("", "4", "1 (before numpy was loaded)"),
        ("import numpy", "", "1 (after numpy was loaded, by the library's own call)"),
        ("import numpy", "4", "1 (after numpy was loaded, by the library's own call)"),
        ("import numpy", "1", "1 (by the environment of the process)"),
    ],
)
def test_one_thread_is_used_whatever_came_first(first: str, set_before: str, expected: str) -> None:
    environment = {name: value for name, value in os.environ.items() if name not in VARIABLES}
    environment |= dict.fromkeys(VARIABLES, set_before) if set_before else {}
    code = CODE.format(first=first, variables=VARIABLES)
    out = subprocess.run([sys.executable, "-c", code], env=environment, capture_output=True, text=True, check=True)
    assert out.stdout == f"{expected} {['1'] * len(VARIABLES)}\n"


def test_the_module_itself_loads_no_numpy() -> None:
    code = "import sys, linverify.core.threads as t; print('numpy' in sys.modules, t.told('not at all'))"
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert out.stdout == "False unknown (not at all)\n"
