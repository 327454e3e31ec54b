"""Groups, factors and fields for tests of rigid-body motions."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from meshes import Sector, box, ring, somewhere
from scipy.spatial import cKDTree

from expander.groups import CutPlane, CyclicAxis, Group, make_group
from expander.placements import unit

X, Y, Z = np.eye(3)
WORD = {1: "S", -1: "A"}


def at_angle(degrees: float) -> np.ndarray:
    """Normal of a plane through z that the plane with normal x meets at this angle."""
    return np.array([np.cos(np.deg2rad(degrees)), np.sin(np.deg2rad(degrees)), 0.0])


@dataclass(frozen=True, eq=False)
class Case:
    """Normals of planes through one point, sectors about z there, and how the load behaves."""

    normals: Sequence[np.ndarray]
    signs: tuple[int, ...]
    sectors: int = 0
    h: int = 0

    def build(
        self, R: np.ndarray | None = None, t: Sequence[float] = (0.0, 0.0, 0.0)
    ) -> tuple[Group, np.ndarray]:
        """The group carried to x -> R x + t, and chi of every copy."""
        turn = np.eye(3) if R is None else R
        at = np.array(t, dtype=float)
        planes = [
            CutPlane(f"plane {k + 1}", unit(turn @ n), at) for k, n in enumerate(self.normals)
        ]
        axis = CyclicAxis(self.sectors, unit(turn @ Z), at) if self.sectors else None
        group = make_group(planes, axis)
        each: list[complex] = list(self.signs)
        if self.sectors:
            each.append(np.exp(2j * np.pi * self.h / self.sectors))
        chi = np.ones(len(group), dtype=complex)
        for g in range(1, len(group)):
            chi[g] = chi[group.parent[g]] * each[group.generator[g]]
        # The oracle is only one if the factors are a character.
        assert np.abs(chi[group.times] - chi[:, None] * np.array(each)).max() < 1e-9
        real = self.sectors == 0 or self.h in (0, self.sectors / 2)
        return group, chi.real.round() if real else chi


def signs(count: int) -> list[tuple[int, ...]]:
    return list(itertools.product((1, -1), repeat=count))


def _all_cases() -> dict[str, Case]:
    found = {}
    sets = {"x": [X], "x y": [X, Y], "x y z": [X, Y, Z]}
    sets |= {f"planes at {a} degrees": [X, at_angle(a)] for a in (30, 45)}
    for name, normals in sets.items():
        for s in signs(len(normals)):
            found[f"{name} {''.join(WORD[k] for k in s)}"] = Case(normals, s)
    for s in (1, -1):
        found[f"planes at 60 degrees {WORD[s] * 2}"] = Case([X, at_angle(60)], (s, s))
        for up in (1, -1):
            case = Case([X, at_angle(60), Z], (s, s, up))
            found[f"planes at 60 degrees and z {WORD[s] * 2 + WORD[up]}"] = case
    for N in range(2, 13):
        for h in range(N // 2 + 1):
            found[f"N = {N} h = {h}"] = Case([], (), N, h)
            for s in (1, -1):
                found[f"N = {N} h = {h} z {WORD[s]}"] = Case([Z], (s,), N, h)
                if h in (0, N / 2):
                    found[f"N = {N} h = {h} through the axis {WORD[s]}"] = Case([X], (s,), N, h)
    return found


CASES = _all_cases()

# Sectors that fill the whole body of the case: name -> (sector, case).
BODIES: dict[str, tuple[Sector, Case]] = {
    "half A": (box((2, 2, 2)), Case([X], (-1,))),
    "quarter SS": (box((2, 2, 2)), Case([X, Y], (1, 1))),
    "quarter SA": (box((2, 2, 1)), Case([X, Y], (1, -1))),
    "quarter AA": (box((2, 2, 1)), Case([X, Y], (-1, -1))),
    "eighth SSA": (box((2, 1, 2)), Case([X, Y, Z], (1, 1, -1))),
    "wedge of 60 degrees AA": (
        ring(3, (2, 2, 1), part=0.5),
        Case([Y, np.array([-np.sin(np.pi / 3), 0.5, 0.0])], (-1, -1)),
    ),
    "two sectors h = 1": (ring(2, (1, 4, 1)), Case([], (), 2, 1)),
    "five sectors h = 0": (ring(5, (2, 2, 1), lean=0.1), Case([], (), 5, 0)),
    "five sectors h = 1": (ring(5, (2, 2, 1), lean=0.1), Case([], (), 5, 1)),
    "pie of four h = 1": (ring(4, (2, 2, 1), inner=0.0), Case([], (), 4, 1)),
    "pie of six h = 1, z S": (ring(6, (2, 2, 1), inner=0.0), Case([Z], (1,), 6, 1)),
}


def placed_body(name: str) -> tuple[np.ndarray, Group, np.ndarray]:
    """Points of a sector somewhere askew, its group and chi."""
    R, t = somewhere(3)
    sector, case = BODIES[name]
    return (sector.moved(R, t).points, *case.build(R, t))


def equivariant(
    group: Group, chi: np.ndarray, f: Callable[[np.ndarray], np.ndarray], axial: bool = False
) -> Callable[[np.ndarray], np.ndarray]:
    """The part u of a vector field f, points (n, 3) to (n, 3), with ``u(g x) = chi Q u(x)``."""

    def u(x: np.ndarray) -> np.ndarray:
        terms = [
            np.conj(c) * (p.det if axial else 1) * f(p.apply(x)) @ p.Q
            for c, p in zip(chi, group.placements, strict=True)
        ]
        return np.mean(terms, axis=0)

    return u


def waves(seed: int, complex_: bool) -> Callable[[np.ndarray], np.ndarray]:
    """A smooth vector field without any symmetry."""
    rng = np.random.default_rng(seed)
    k, phase, amount = rng.normal(size=(4, 3)), rng.uniform(0, 6, 4), rng.normal(size=(2, 4, 3))
    many = amount[0] + 1j * amount[1] if complex_ else amount[0]
    return lambda x: np.sin(x @ k.T + phase) @ many


def whole(
    points: np.ndarray, group: Group, chi: np.ndarray, u: np.ndarray
) -> tuple[np.ndarray, np.ndarray, float]:
    """Each node of the whole body once, u there, and the largest gap at the seams."""
    x = np.concatenate([p.apply(points) for p in group.placements])
    v = np.concatenate([c * u @ p.Q.T for c, p in zip(chi, group.placements, strict=True)])
    pairs = cKDTree(x).query_pairs(1e-8, output_type="ndarray")
    gap = float(np.abs(v[pairs[:, 0]] - v[pairs[:, 1]]).max(initial=0.0))
    first = np.setdiff1d(np.arange(len(x)), pairs.max(axis=1, initial=-1))
    return x[first], v[first], gap


def multiplicity(points: np.ndarray, group: Group) -> np.ndarray:
    """(n,) number of copies that share each node of the sector."""
    x = np.concatenate([p.apply(points) for p in group.placements])
    return np.array([len(n) for n in cKDTree(x).query_ball_point(points, 1e-8)])
