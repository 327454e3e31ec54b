"""Lets the tests here import their shared `bodies` however pytest was started."""

from __future__ import annotations

import sys
from pathlib import Path

ROOT = str(Path(__file__).parents[2])
if ROOT not in sys.path:
    sys.path.insert(0, ROOT)
