"""Tests compute as the commands do: linear algebra in one thread, here and in the processes they start."""

import os

from rig.single_thread import keep_single

keep_single(os.environ)
