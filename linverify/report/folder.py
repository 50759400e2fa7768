"""Can reports be written where they are asked for? Seen before anything is computed. Standard library only.

A run of an hour must not end in a folder that cannot be written to. Nothing is made for the test: a run that is refused
leaves no trace. A disk that fills up later cannot be foreseen; that is told when it happens, and the verdicts stand.
"""

from __future__ import annotations

import os
from pathlib import Path

EVIDENCE = "evidence"  # folder of the saved drives, within that of the reports


def refusal(reports: Path) -> str:
    """Why nothing can be written to the folder `reports`, in one sentence; empty where nothing speaks against it."""
    for folder in (reports, reports / EVIDENCE):
        place = next(place for place in (folder, *folder.parents) if os.path.lexists(place))
        wrong = ""
        if not place.is_dir():
            wrong = "is in the way and no folder"
        elif not os.access(place, os.W_OK | os.X_OK):
            wrong = "cannot be written to"
        if wrong:
            return f"no reports can be written to {_typed(reports)}: {_typed(place)} {wrong}"
    return ""


def _typed(path: Path) -> str:
    here = Path.cwd()
    return path.relative_to(here).as_posix() if path.is_relative_to(here) else path.as_posix()
