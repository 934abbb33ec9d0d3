"""Whether a session file is what was recorded: each check finds all that is wrong in its own field."""
