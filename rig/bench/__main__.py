"""`python -m rig.bench`: one run, asked for by a line of JSON on standard input."""

import os

from rig.single_thread import keep_single

keep_single(os.environ)

from rig.bench.process import main  # noqa: E402  (loads numpy)

main()
