"""A simulated bench in its own process: a tank with physics and instruments that speak real protocols."""
