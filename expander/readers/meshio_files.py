"""Every other format: placeholder until the next change."""

from __future__ import annotations

from pathlib import Path

from expander.model import Model


def extensions() -> list[str]:
    return []


def reads(path: Path) -> bool:
    return False


def read(path: Path) -> Model:
    raise NotImplementedError
