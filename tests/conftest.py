"""Shared by all tests; its folder is on the path, so `invented_fields` can be imported."""

from __future__ import annotations

import os

os.environ.setdefault("MPLBACKEND", "Agg")
