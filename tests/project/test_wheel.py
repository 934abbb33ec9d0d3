"""What an installed wheel holds: three packages, the report's templates, the shipped rigs and protocols."""

from __future__ import annotations

import subprocess
import sys
import zipfile
from pathlib import Path

from rig.shipped import shipped_files

ROOT = Path(__file__).parents[2]


def test_wheel(tmp_path: Path) -> None:
    words = [
        sys.executable,
        "-m",
        "pip",
        "wheel",
        "--quiet",
        "--no-deps",
        "--wheel-dir",
        str(tmp_path),
        str(ROOT),
    ]
    done = subprocess.run(words, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    (wheel,) = tmp_path.glob("haltere-*.whl")
    names = zipfile.ZipFile(wheel).namelist()
    tops = {name.split("/")[0] for name in names}
    packages = {top for top in tops if not top.endswith((".dist-info", ".data"))}
    assert packages == {"rig", "drivers", "analysis"}
    shipped = {Path(name).stem for name in names if "/share/haltere/protocols/" in name}
    assert shipped == set(shipped_files())
    assert any(name.endswith("report.html.j2") for name in names)
    assert not any(name.startswith("tests") or name.endswith((".nbi", ".nbc")) for name in names)
