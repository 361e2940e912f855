"""Profiles: what instruments, benches, sensors, sources and scans are, as TOML files and their models."""
