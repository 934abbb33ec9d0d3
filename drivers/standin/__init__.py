"""The stand-in: a simulated bench at the far end of a real wire, in the board's own bytes and in real time."""
