"""Makes the conformance suite, the simulated rigs and their mechanisms importable, whatever the import mode."""

import sys
from pathlib import Path

for folder in (Path(__file__).parent, Path(__file__).parents[1] / "mechanism"):
    sys.path.insert(0, str(folder))
