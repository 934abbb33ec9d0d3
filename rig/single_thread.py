"""Linear algebra in one thread.

What is solved here is small: threads make none of it faster, and those that wait for each other take the core that
a bench process or a window needs. Results then do not depend on the number of cores either.
"""

from __future__ import annotations

from collections.abc import MutableMapping

#: Read by the libraries under numpy when it is loaded, and handed on to processes started later.
NAMES = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")


def keep_single(environment: MutableMapping[str, str]) -> None:
    """One thread, unless the environment says otherwise. To be called before numpy is loaded."""
    for name in NAMES:
        environment.setdefault(name, "1")
