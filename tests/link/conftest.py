"""Makes what the link's tests share importable, here and from `tests/drivers`, whatever the import mode."""

import sys
from pathlib import Path

HERE = Path(__file__).parent
sys.path[:0] = [str(HERE), str(HERE.parent / "drivers")]
