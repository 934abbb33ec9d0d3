"""How long the window takes to be there, against the bare imports of what it is drawn with; interleaved.

.venv/bin/python tests/benchmarks/window_start.py [ROUNDS]
"""

from __future__ import annotations

import json
import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

BARE = """
import numpy, pyqtgraph
from PySide6.QtWidgets import QApplication, QMainWindow
app = QApplication([])
window = QMainWindow()
window.show()
app.processEvents()
"""
WINDOW = """
import sys
from pathlib import Path
from rig.desk.entry import application, window
app = application()
shown = window(Path(sys.argv[1]), Path(sys.argv[1]))
shown.show()
app.processEvents()
import os
os._exit(0)
"""


def seconds(script: str, folder: str) -> float:
    began = time.perf_counter()
    environment = {**os.environ, "QT_QPA_PLATFORM": "offscreen"}
    subprocess.run([sys.executable, "-c", script, folder], env=environment, check=True)
    return time.perf_counter() - began


def main() -> None:
    rounds = int(sys.argv[1]) if len(sys.argv) > 1 else 7
    bare, shown = [], []
    with tempfile.TemporaryDirectory() as folder:
        for _ in range(rounds):
            bare.append(seconds(BARE, folder))
            shown.append(seconds(WINDOW, folder))
    ratios = [one / other for one, other in zip(shown, bare, strict=True)]
    told = {
        "rounds": rounds,
        "bare_imports_s": round(statistics.median(bare), 3),
        "window_s": round(statistics.median(shown), 3),
        "ratio_median": round(statistics.median(ratios), 2),
        "ratio_least": round(min(ratios), 2),
    }
    print(json.dumps(told))
    Path(__file__).with_suffix(".json").write_text(json.dumps(told, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
