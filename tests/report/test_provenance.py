"""Where a run came from: hashed files, commit, versions, machine; and nothing that one machine alone would know."""

from __future__ import annotations

import hashlib
import json
import socket
import subprocess
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path

import pytest

from linverify import provenance
from linverify.core.case import Options
from linverify.report.wire import plain


def git(root: Path, *arguments: str) -> None:
    who = ["-c", "user.name=Tester", "-c", "user.email=tester@example.org", "-c", "commit.gpgsign=false"]
    subprocess.run(["git", "-C", str(root), *who, *arguments], check=True, capture_output=True)


@pytest.fixture
def tree(tmp_path: Path) -> Path:
    """A small project under git with one commit."""
    git(tmp_path, "init", "-q")
    (tmp_path / "specs").mkdir()
    (tmp_path / "specs" / "ride.yaml").write_bytes(b"linverify: 1\n")
    git(tmp_path, "add", "-A")
    git(tmp_path, "commit", "-q", "-m", "first")
    return tmp_path


def test_files_are_hashed_under_their_relative_path(tree: Path, tmp_path_factory: pytest.TempPathFactory) -> None:
    spec = tree / "specs" / "ride.yaml"
    foreign = tmp_path_factory.mktemp("elsewhere") / "plant.py"
    foreign.write_bytes(b"")
    found = provenance.hashes([foreign, spec, Path("specs/ride.yaml"), tree / "gone.csv"], tree)
    assert found == {
        "specs/ride.yaml": hashlib.sha256(b"linverify: 1\n").hexdigest(),
        "plant.py": hashlib.sha256(b"").hexdigest(),
        "gone.csv": "cannot be read",
    }


def test_commit_and_dirty_flag(tree: Path) -> None:
    clean = provenance.git_state(tree)
    assert len(clean["commit"]) == 40
    assert clean["dirty"] is False
    (tree / "specs" / "ride.yaml").write_text("linverify: 1\ntitle: changed\n", encoding="utf-8")
    assert provenance.git_state(tree) == {"commit": clean["commit"], "dirty": True}


def test_a_new_file_makes_a_tree_dirty_but_reports_do_not(tree: Path) -> None:
    reports = tree / "reports"
    reports.mkdir()
    (reports / "linverify.json").write_text("{}", encoding="utf-8")
    assert provenance.git_state(tree, reports)["dirty"] is False
    assert provenance.git_state(tree, Path("reports"))["dirty"] is False
    assert provenance.git_state(tree)["dirty"] is True
    (tree / "new.py").write_text("", encoding="utf-8")
    assert provenance.git_state(tree, reports)["dirty"] is True


def test_without_git_it_says_that_it_does_not_know(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("GIT_CEILING_DIRECTORIES", str(tmp_path.parent))
    unknown = {"commit": None, "dirty": None}
    assert provenance.git_state(tmp_path) == unknown
    monkeypatch.setenv("PATH", "")
    assert provenance.git_state(tmp_path) == unknown


def test_everything_is_plain_and_no_host_or_folder_is_named(tree: Path) -> None:
    options = Options(seed=5, profile="quick", reports=tree / "reports")
    found = provenance.gathered([tree / "specs" / "ride.yaml"], tree, options, threads="one", tolerances={"trim": 1e-8})
    told = json.dumps(plain(found), sort_keys=True)
    assert str(tree) not in told
    assert socket.gethostname() not in told
    assert (found["seed"], found["profile"], found["tolerances"]) == (5, "quick", {"trim": 1e-8})
    assert found["machine"]["threads"] == "one"
    assert set(found["versions"]) == {"python", *provenance.PACKAGES}
    assert "unknown" not in found["versions"].values()


def test_the_time_is_universal(tree: Path) -> None:
    local = datetime(2001, 2, 3, 4, 5, 6, tzinfo=timezone(timedelta(hours=2)))
    assert provenance.gathered([], tree, Options(), now=local)["time"] == "2001-02-03 02:05:06 UTC"
    clock = datetime.strptime(provenance.gathered([], tree, Options())["time"], "%Y-%m-%d %H:%M:%S UTC")
    assert abs(clock.replace(tzinfo=UTC) - datetime.now(UTC)) < timedelta(minutes=1)


def test_the_machine_is_told_by_what_decides_bits() -> None:
    machine = provenance.machine()
    assert set(machine) == {"processor", "architecture", "system", "vector_extensions", "blas", "blas_kernel"}
    assert all(machine[word] for word in ("processor", "architecture", "system", "blas", "blas_kernel"))


def test_a_missing_package_is_unknown(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(provenance, "PACKAGES", ("no-such-package-here",))
    assert provenance.versions()["no-such-package-here"] == "unknown"


def test_a_machine_without_a_processor_file_has_a_word_for_it(monkeypatch: pytest.MonkeyPatch) -> None:
    def missing(self: Path, **how: str) -> str:
        raise FileNotFoundError(2, "No such file")

    monkeypatch.setattr(Path, "read_text", missing)
    assert provenance.processor()
