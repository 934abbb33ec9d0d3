"""The bench process: bench, interlocks, heartbeat, journal and runner live together here, off everything else.

client --control pipe--> bench process --journal--> analysis process
                              ^------------verdicts------'
"""
