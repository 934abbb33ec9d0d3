"""`python -m rig.bench`: one run, asked for by a line of JSON on standard input."""

from rig.bench.process import main

main()
