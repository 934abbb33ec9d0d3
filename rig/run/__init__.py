"""Carrying out a protocol on a bench: runner, interlocks, and the loop that ties them together."""
