"""Helpers of a test room are imported by their own name from its folder."""

from __future__ import annotations

import sys
from pathlib import Path

for folder in ("optimize",):
    sys.path.insert(0, str(Path(__file__).parent / folder))
