"""Results of a sector model turned into the results of the whole body.

The one idea, for a copy made by the placement ``g`` (``x -> Q x + t``)::

    f(g x) = chi(g) * rho(Q) * f(x)

``chi`` is the load behaviour, ``rho`` the way the quantity turns with the body.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from expander.casefile import read_case
    from expander.checkup import check
    from expander.errors import CheckFailed, InputError, NotYetError, SeamfoldError
    from expander.expansion import expand, plan

__all__ = [
    "CheckFailed",
    "InputError",
    "NotYetError",
    "SeamfoldError",
    "check",
    "expand",
    "plan",
    "read_case",
]

_HOMES = {"check": "checkup", "expand": "expansion", "plan": "expansion", "read_case": "casefile"}


def __getattr__(name: str) -> object:
    """Public names, imported when first used, so that the command line starts at once."""
    import importlib

    if name not in __all__:
        raise AttributeError(f"module 'expander' has no attribute {name!r}")
    return getattr(importlib.import_module(f"expander.{_HOMES.get(name, 'errors')}"), name)
