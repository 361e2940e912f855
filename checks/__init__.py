"""Measurement science and the live checks built on it: pure functions, no I/O, no clock."""
