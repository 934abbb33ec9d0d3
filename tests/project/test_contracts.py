"""The rules of the house hold: style, types, who may import whom, and what the headless path loads."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
PACKAGES = ("rig", "drivers", "analysis")


def run(*words: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(words, cwd=ROOT, capture_output=True, text=True, check=False)


@pytest.mark.parametrize(
    "words",
    [
        ("ruff", "check", "."),
        ("ruff", "format", "--check", "."),
        ("mypy",),
    ],
    ids=lambda words: " ".join(words),
)
def test_clean(words: tuple[str, ...]) -> None:
    done = run(sys.executable, "-m", *words)
    assert done.returncode == 0, done.stdout + done.stderr


def test_import_contracts_are_kept() -> None:
    done = run(sys.executable, "-c", "from importlinter.cli import lint_imports_command as c; c()")
    assert done.returncode == 0, done.stdout + done.stderr


def importers(module: str) -> set[str]:
    """Files of the three packages that import `module` or anything below it."""
    found = set()
    for package in PACKAGES:
        for file in (ROOT / package).rglob("*.py"):
            for node in ast.walk(ast.parse(file.read_text(encoding="utf-8"))):
                names = []
                if isinstance(node, ast.Import):
                    names = [alias.name for alias in node.names]
                elif isinstance(node, ast.ImportFrom) and node.module:
                    names = [node.module]
                if any(name == module or name.startswith(module + ".") for name in names):
                    found.add(file.relative_to(ROOT).as_posix())
    return found


def test_pyserial_is_imported_by_one_file() -> None:
    assert importers("serial") == {"drivers/ports.py"}


def test_logic_never_asks_for_the_wall_clock() -> None:
    """Time comes from board ticks or from the injected clock; only its implementation reads one."""
    users = {name for module in ("time", "datetime") for name in importers(module)}
    allowed = {
        "drivers/clock.py",
        "rig/command/moment.py",  # the date a file is created, injected from here
        "rig/record/durability.py",  # the side thread that syncs
    }
    assert users <= allowed


def test_usage_errors_load_nothing_heavy() -> None:
    """A mistyped command answers at once: numerics, plotting and HDF5 stay unloaded."""
    script = (
        "import sys; from rig.command import main; code = main(['nonsense']);"
        "heavy = {'numpy', 'scipy', 'numba', 'h5py', 'matplotlib'} & set(sys.modules);"
        "print(code, sorted(heavy))"
    )
    done = run(sys.executable, "-c", script)
    assert done.stdout.strip() == "2 []", done.stdout + done.stderr


def test_no_source_file_is_long() -> None:
    """One idea a file; a few hundred lines at most.

    But a family of kernels stays in one file: numba would run old code from its cache if it were spread out.
    """
    long = {
        file.relative_to(ROOT).as_posix()
        for package in (*PACKAGES, "tests")
        for file in (ROOT / package).rglob("*.py")
        if len(file.read_text(encoding="utf-8").splitlines()) > (500 if file.name == "equations.py" else 400)
    }
    assert not long
