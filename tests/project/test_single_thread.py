"""Commands and the bench process keep the linear algebra to one thread, unless told otherwise."""

from __future__ import annotations

import os
import subprocess
import sys

from rig.single_thread import NAMES, keep_single


def test_what_the_environment_says_stays() -> None:
    environment = {NAMES[0]: "4"}
    keep_single(environment)
    assert environment == {NAMES[0]: "4", NAMES[1]: "1", NAMES[2]: "1"}


def test_the_command_says_so_before_numpy_is_loaded() -> None:
    script = """
import os, sys
import rig.command
assert "numpy" not in sys.modules
rig.command.main(["about"])
print(os.environ["OPENBLAS_NUM_THREADS"])
"""
    bare = {name: value for name, value in os.environ.items() if name not in NAMES}
    done = subprocess.run(
        [sys.executable, "-c", script], env=bare, capture_output=True, text=True, check=True
    )
    assert done.stdout.split("\n")[-2] == "1"
