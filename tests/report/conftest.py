"""Makes the invented session of this folder importable by its tests, whatever the import mode."""

import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))


@pytest.fixture(scope="session")
def short_session():  # type: ignore[no-untyped-def]
    """A few levels of an invented rig, 1 kHz."""
    from invented_session import invent

    return invent(rising_v=(6.0, 8.0, 9.0), falling_v=(8.0, 7.5, 7.0), taps=2)
