"""The files people write: rig files and protocol files, with every mistake told at its line."""
