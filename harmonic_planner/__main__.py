"""Lets ``python -m harmonic_planner`` do what the command ``harmonic-planner`` does."""

import sys

from harmonic_planner.cli import main

if __name__ == "__main__":
    sys.exit(main())
