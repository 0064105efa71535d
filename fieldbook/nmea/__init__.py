"""NMEA 0183, bytes to epochs: a pure function of recorded items. No I/O, no clock, never raises on input."""
