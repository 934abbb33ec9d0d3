"""Makes the record generator of this folder importable by its tests, whatever the import mode."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))
