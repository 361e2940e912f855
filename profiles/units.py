"""Factors that turn the units of profile keys into SI: `speed_mm_per_s * MM` is in metres per second."""

from math import pi

MM = 1e-3
UM = 1e-6
DEG = pi / 180
MHZ = 1e6
KHZ = 1e3
US = 1e-6
NS = 1e-9
MS = 1e-3
MV = 1e-3
UV = 1e-6
KPA = 1e3
