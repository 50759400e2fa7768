"""The options of the plugin, resolved once into one frozen value. Imports pytest and the standard library only."""

from __future__ import annotations

import argparse
from dataclasses import dataclass
from pathlib import Path
from typing import Literal, cast

import pytest

KINDS = ("trims", "differentiable", "agrees", "follows", "modes", "margins")
MARKERS = (
    "linverify: a check of an operating point, collected from a spec",
    *(f"linverify_{kind}: a check of the kind `{kind}`" for kind in KINDS),
)
LARGEST_SEED = 2**63 - 1


@dataclass(frozen=True, slots=True)
class Settings:
    """What the command line decides. reports: absolute folder that reports are written to."""

    seed: int
    profile: Literal["full", "quick"]
    reports: Path

    @classmethod
    def of(cls, config: pytest.Config) -> Settings:
        """From the parsed command line; a folder given there is relative to where pytest was started."""
        given = config.getoption("linverify_reports")
        reports = config.invocation_params.dir / given if given else config.rootpath / "reports"
        profile = cast(Literal["full", "quick"], config.getoption("linverify_profile"))
        return cls(config.getoption("linverify_seed"), profile, reports)


SETTINGS = pytest.StashKey[Settings]()


def add_options(parser: pytest.Parser) -> None:
    """One flag that switches everything on, and three values."""
    group = parser.getgroup("linverify", "linear models against their nonlinear plants")
    group.addoption("--linverify", action="store_true", help="collect specs (*.yaml) and judge what they ask for")
    group.addoption(
        "--linverify-seed",
        type=seed,
        default=0,
        metavar="N",
        help="seed of the random and searched drives (default: 0)",
    )
    group.addoption(
        "--linverify-profile",
        choices=("full", "quick"),
        default="full",
        help="quick: fewer drives, not for acceptance (default: full)",
    )
    group.addoption(
        "--linverify-reports",
        metavar="DIR",
        default=None,
        help="folder for the reports (default: reports/ under the root folder)",
    )


def seed(text: str) -> int:
    """A seed from a command line. Raises ArgumentTypeError."""
    try:
        value = int(text)
    except ValueError:
        value = -1
    if not 0 <= value <= LARGEST_SEED:
        raise argparse.ArgumentTypeError(f"a seed is a whole number from 0 to {LARGEST_SEED}, got {text!r}")
    return value
