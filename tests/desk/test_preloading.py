"""What a first run needs is read beforehand, and without the toolkit, which is not for threads."""

from __future__ import annotations

import subprocess
import sys

SCRIPT = """
import sys
from rig.desk.preloading import WANTED, preload
assert not [name for name in WANTED if name in sys.modules]
preload().join()
missing = [name for name in WANTED if name not in sys.modules]
toolkit = [name for name in sys.modules if name.split(".")[0] in ("PySide6", "shiboken6", "pyqtgraph")]
print(missing, toolkit)
"""


def test_what_is_wanted_is_read_and_nothing_of_the_toolkit() -> None:
    done = subprocess.run([sys.executable, "-c", SCRIPT], capture_output=True, text=True, check=True)
    assert done.stdout == "[] []\n"


def test_what_cannot_be_read_is_left_to_whoever_needs_it() -> None:
    script = SCRIPT.replace("preload().join()", 'sys.modules["scipy"] = None; preload().join()')
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert "analysis.planning" in done.stdout and done.stderr == ""
