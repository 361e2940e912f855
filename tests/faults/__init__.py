"""Benches drawn at random, scanned through the simulator's physics and the real checks, without sockets."""
