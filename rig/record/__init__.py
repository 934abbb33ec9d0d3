"""The recorder: a journal that survives a crash, and the session file sealed from it."""
