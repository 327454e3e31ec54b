"""Measures computed again from components, since they cannot be copied or added themselves."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass

import numpy as np

from expander.fields import Field
from expander.placements import Floats
from expander.quantities import Quantity
from expander.tradewords import normalised


@dataclass(frozen=True)
class Derived:
    """A measure of a field: its name, components, and how it follows from stored components."""

    name: str
    components: tuple[str, ...]
    values: Callable[[Quantity, Floats], Floats]


def full_array(q: Quantity, values: Floats) -> Floats:
    """Stored components to vectors (n, 3) or tensors (n, 3, 3); what is not stored is zero."""
    return (values @ q.spread.T).reshape((len(values),) + (3,) * q.kind.rank)


def von_mises(q: Quantity, values: Floats) -> Floats:
    """Von Mises stress, (n, 1).

    >>> from expander.quantities import quantity
    >>> von_mises(quantity("symmetric tensor", 6), np.array([[0, 0, 0, 1.0, 0, 0]])) ** 2
    array([[3.]])
    """
    T = full_array(q, values)
    deviator = T - np.trace(T, axis1=1, axis2=2)[:, None, None] / 3.0 * np.eye(3)
    return np.asarray(np.sqrt(1.5 * np.einsum("nij,nij->n", deviator, deviator)))[:, None]


def principal_values(q: Quantity, values: Floats) -> Floats:
    """Largest, middle and smallest principal value, (n, 3)."""
    T = full_array(q, values)
    finite = np.isfinite(T).all(axis=(1, 2))
    found = np.full((len(T), 3), np.nan)
    found[finite] = np.linalg.eigvalsh(T[finite])[:, ::-1]
    return found


def magnitude(q: Quantity, values: Floats) -> Floats:
    """Length of a vector, (n, 1)."""
    return np.asarray(np.linalg.norm(full_array(q, values), axis=1)[:, None], dtype=float)


def derived_notes(fields: Iterable[Field], wanted: Iterable[str]) -> list[str]:
    """What `output.derived` asks for and does not get, each a sentence."""
    listed = list(fields)
    notes = []
    for word in wanted:
        extras = [e for f in listed for e in derived_fields(f, [word])]
        if not extras:
            notes.append(
                f"output.derived: {word!r} was asked for, but no field gives it (a stress is a "
                "symmetric tensor with the word stress in its name)"
            )
        flat = [
            f.name
            for f in listed
            for e in derived_fields(f, [word])
            if e.values is von_mises and not any("z" in c for c in f.quantity.components)
        ]
        notes += [
            f"output.derived: {word!r} of {name!r} takes stresses out of the plane as zero (plane "
            "stress)"
            for name in flat
        ]
        own = {f.name for f in listed}
        notes += [
            f"output.derived: {e.name!r} is an array of the model already, which is kept where it "
            "can be copied"
            for e in extras
            if e.name in own
        ]
    return notes


def derived_fields(f: Field, wanted: Iterable[str]) -> list[Derived]:
    """What `output.derived` asks to compute from this field."""
    found = []
    words = set(wanted)
    finite = f.kind in ("symmetric tensor", "polar vector", "axial vector")
    if not finite or f.follows == "body":
        return []
    is_stress = f.kind == "symmetric tensor" and "stress" in normalised(f.name)
    if "von mises" in words and is_stress:
        found.append(Derived(f"{f.name}_von_mises", (), von_mises))
    if "principal stresses" in words and is_stress:
        found.append(
            Derived(f"{f.name}_principal", ("largest", "middle", "smallest"), principal_values)
        )
    if "magnitude" in words and f.quantity.kind.rank == 1:
        found.append(Derived(f"{f.name}_magnitude", (), magnitude))
    return found
