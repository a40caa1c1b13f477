"""Invented fields for the lattice: rotated, dipping, faulted cells and the error of a result."""

from __future__ import annotations

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1] / "benchmarks"))
