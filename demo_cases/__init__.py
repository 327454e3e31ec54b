"""Demo cases: sector results of invented bodies, each in a folder with its case file.

The data were computed by `compute.py` in the same folder, which needs scikit-fem; using the
demos does not.
"""

from __future__ import annotations

import re
from pathlib import Path


def available() -> dict[str, Path]:
    """Name and folder of every demo case."""
    folders = (case.parent for case in Path(__file__).parent.glob("*/case.toml"))
    return {folder.name: folder for folder in sorted(folders)}


def summary(name: str) -> str:
    """The first sentence of a demo's README: what the body is and how it is loaded."""
    text = (available()[name] / "README.md").read_text(encoding="utf-8")
    paragraphs = [p for p in text.split("\n\n") if p.strip() and not p.startswith("#")]
    return re.split(r"(?<=\.)\s", " ".join(paragraphs[0].split()), maxsplit=1)[0]
