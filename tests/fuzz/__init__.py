"""Fuzz targets: hostile bytes at every door of the program, each with the property that must hold.

`python -m tests.fuzz` drives them for minutes or hours; `test_fuzz_smoke.py` runs each for a moment with fixed seeds;
`test_regressions.py` keeps what was once found. A target is a function of bytes that raises if its property fails.
Only relative imports: inside pytest this package is called `fuzz`.
"""
