"""Lines through vector fields: seeds, tracing, what a line is and where it ends."""
