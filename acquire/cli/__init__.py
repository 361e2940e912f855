"""The command line. Modules that take long to import are imported by the commands that need them."""

from __future__ import annotations

from acquire.cli.app import main

__all__ = ["main"]
