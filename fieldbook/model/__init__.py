"""Values that cross layers: items, epochs, sessions, entries, reductions. No I/O, no clock, no numpy."""
