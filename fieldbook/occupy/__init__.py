"""Recording: the recorder process, what starts and ends it, and what is read back from it."""
