"""Where this user's programs keep what must outlive them, by the custom of the system."""

from __future__ import annotations

from platformdirs import user_state_path


def state_folder() -> str:
    """The folder, made if it is not there; "" if it cannot be made, and then nothing is kept."""
    try:
        return str(user_state_path("haltere", ensure_exists=True))
    except OSError:
        return ""
