"""`python -m acquire.cli`."""

from acquire.cli.app import main

main()
