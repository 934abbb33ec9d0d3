"""The link between host and board, without I/O: framing, messages, rows. Bytes in, messages out."""
