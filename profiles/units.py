"""Factors that turn the units of profile keys into SI: `speed_mm_per_s * MM` is in metres per second."""

from math import pi

MM = 1e-3
UM = 1e-6
DEG = pi / 180
MHZ = 1e6
US = 1e-6
MS = 1e-3
