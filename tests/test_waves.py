"""Waves around a ring: amplitudes, moments of the cycle, directions, means and peaks.

The oracle is a field on the whole ring that is made equivariant by hand, with matrices typed here:
``F(x) = 1/N sum_k exp(-i h k alpha) R^-k f(R^k x)`` for any smooth complex f.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from meshes import ring

import expander
from expander.casefile import CaseFile, validate_case
from expander.errors import InputError
from expander.expansion import plan

Field = Callable[[np.ndarray], np.ndarray]
SECTORS = 7
VON_MISES, LARGEST = "stress_von_mises", "stress_largest_principal"


def turn(k: int) -> np.ndarray:
    a = 2.0 * np.pi * k / SECTORS
    c, s = np.cos(a), np.sin(a)
    return np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])


def smooth(seed: int) -> tuple[Field, Field]:
    """A complex vector field and a complex symmetric tensor field of position."""
    rng = np.random.default_rng(seed)
    K = rng.normal(size=(3, 3))
    c = rng.normal(size=3) + 1j * rng.normal(size=3)
    S = rng.normal(size=(3, 3, 3)) + 1j * rng.normal(size=(3, 3, 3))

    def vector(p: np.ndarray) -> np.ndarray:
        return np.sin(p @ K.T) + 1j * c * np.cos(p @ K.T + 1.0)

    def tensor(p: np.ndarray) -> np.ndarray:
        T = np.einsum("nk,kij->nij", vector(p), S)
        return T + T.transpose(0, 2, 1)

    return vector, tensor


def wave(f: Field, h: int) -> Field:
    """What of a field on the ring has h nodal diameters."""

    def found(p: np.ndarray) -> np.ndarray:
        total: Any = 0
        for k in range(SECTORS):
            R, values = turn(k), f(p @ turn(k).T)
            back = values @ R if values.ndim == 2 else R.T @ values @ R
            total = total + np.exp(-2j * np.pi * h * k / SECTORS) * back
        return total / SECTORS

    return found


def six(T: np.ndarray) -> np.ndarray:
    return np.stack([T[:, a, b] for a, b in ((0, 0), (1, 1), (2, 2), (0, 1), (1, 2), (2, 0))], 1)


class Ring:
    """A sector file with a wave, one with a mean that is the same in every sector, and cases."""

    def __init__(self, folder: Path, h: int = 2) -> None:
        vector, tensor = smooth(4)
        self.h, self.folder = h, folder
        self.u, self.s = wave(vector, h), wave(tensor, h)
        still_u, still_s = smooth(9)
        self.mean_u, self.mean_s = wave(still_u, 0), wave(still_s, 0)
        sector = ring(SECTORS, lean=0.2)
        x = sector.points
        for name, u, s in (
            ("wave", self.u(x), self.s(x)),
            ("still", self.mean_u(x).real + 0j, self.mean_s(x).real + 0j),
        ):
            grid = sector.grid()
            for key, values in (("u", u), ("s", six(s))):
                grid.point_data[f"{key}_re"] = values.real.copy()
                grid.point_data[f"{key}_im"] = values.imag.copy()
            grid.save(folder / f"{name}.vtu")

    def case(
        self, wave: dict[str, Any] | None = None, model: dict[str, Any] | None = None, **more: Any
    ) -> CaseFile:
        words = {"real": "u_re", "imaginary": "u_im"}
        stress = {"components": "xx yy zz xy yz zx", "seam": "recovered"}
        raw = {
            "model": model or {},
            "cyclic": {"sectors": SECTORS},
            "fields": {
                "displacement": {"kind": "polar vector", **words},
                "stress": {"kind": "symmetric tensor", "real": "s_re", "imaginary": "s_im",
                           **stress},
            },
            "case": [
                {"name": "wave", "file": "wave.vtu", "nodal_diameters": self.h, "phase": "+",
                 **(wave or {})},
                {"name": "still", "file": "still.vtu"},
            ],
            **more,
        }  # fmt: skip
        return validate_case(raw, self.folder)


@pytest.fixture
def body(tmp_path: Path) -> Ring:
    return Ring(tmp_path)


def amplitude(grid: Any, name: str) -> np.ndarray:
    return np.asarray(grid[f"{name}_real"]) + 1j * np.asarray(grid[f"{name}_imag"])


def test_amplitude_on_the_whole_ring(body: Ring) -> None:
    grid = expander.expand(body.case(), "wave")
    x = np.asarray(grid.points)
    np.testing.assert_allclose(amplitude(grid, "displacement"), body.u(x), atol=1e-12)
    np.testing.assert_allclose(amplitude(grid, "stress"), six(body.s(x)), atol=1e-12)
    assert "backward" in " ".join(grid.field_data["time"])


@pytest.mark.parametrize("conjugated", [False, True])
def test_the_seam_decides_the_phase(tmp_path: Path, conjugated: bool) -> None:
    """A conjugated amplitude is the wave that runs the other way round."""
    body = Ring(tmp_path)
    words = {"phase": "auto"}
    case = body.case(words)
    if conjugated:
        import pyvista

        file = pyvista.read(tmp_path / "wave.vtu")
        for key in ("u_im", "s_im"):
            file.point_data[key] *= -1.0
        file.save(tmp_path / "wave.vtu")
    grid = expander.expand(case, "wave")
    x = np.asarray(grid.points)
    expected = body.u(x).conj() if conjugated else body.u(x)
    np.testing.assert_allclose(amplitude(grid, "displacement"), expected, atol=1e-12)
    told = " ".join(grid.field_data["assumptions"])
    assert f"closes with '{'-' if conjugated else '+'}'" in told
    assert ("forward" if conjugated else "backward") in " ".join(grid.field_data["time"])


@pytest.mark.parametrize("sign", ["+", "-"])
@pytest.mark.parametrize("moment", [0.0, 37.0, 250.0])
def test_moments_of_the_cycle(body: Ring, sign: str, moment: float) -> None:
    case = body.case(model={"time_factor": f"{sign}i omega t"})
    grid = expander.expand(case, "wave", moment=moment)
    turned = np.exp((1j if sign == "+" else -1j) * np.deg2rad(moment))
    expected = (body.u(np.asarray(grid.points)) * turned).real
    np.testing.assert_allclose(np.asarray(grid["displacement"]), expected, atol=1e-12)
    assert np.asarray(grid.field_data["phase_degrees"])[0] == moment


@pytest.mark.parametrize("time", ["+", "-"])
@pytest.mark.parametrize("wanted", ["forward", "backward"])
def test_which_way_the_crest_runs(body: Ring, time: str, wanted: str) -> None:
    """The phase of a point on the rim falls behind from sector to sector in the direction in
    which the crest runs: found from two moments, without looking at any factor."""
    case = body.case({"wave": wanted, "undamped": True}, model={"time_factor": f"{time}i omega t"})
    grids = [expander.expand(case, "wave", moment=m) for m in (0.0, 90.0)]
    x = np.asarray(grids[0].points)
    start = x[np.argmax(x[:, 0])]
    images = [start @ turn(k).T for k in range(SECTORS)]
    nodes = [int(np.argmin(np.linalg.norm(x - p, axis=1))) for p in images]
    now, later = ([np.asarray(g["displacement"])[n][2] for n in nodes] for g in grids)
    # u_z(t) = A cos(omega t + phase): from the values at 0 and 90 degrees.
    phase = np.unwrap(np.arctan2(-np.array(later), np.array(now)))
    step = np.mean((np.diff(phase) + np.pi) % (2 * np.pi) - np.pi)
    assert np.sign(step) == (-1 if wanted == "forward" else 1)
    assert wanted in " ".join(grids[0].field_data["time"])


def test_standing_wave(body: Ring) -> None:
    case = body.case({"wave": "standing", "undamped": True})
    x = np.asarray(expander.expand(case, "wave").points)
    for moment in (0.0, 60.0):
        grid = expander.expand(case, "wave", moment=moment)
        expected = body.u(x).real * np.cos(np.deg2rad(moment))
        np.testing.assert_allclose(np.asarray(grid["displacement"]), expected, atol=1e-12)


@pytest.mark.parametrize("word", ["forward", "standing"])
def test_another_wave_needs_a_word(body: Ring, word: str) -> None:
    with pytest.raises(InputError, match="gyroscopic") as caught:
        expander.expand(body.case({"wave": word}), "wave")
    assert "undamped = true" in caught.value.remedy


WAYS = [("as given", "+"), ("forward", "+"), ("standing", "+"), ("as given", "-")]


@pytest.mark.parametrize("mean", [False, True], ids=["", "with a mean"])
@pytest.mark.parametrize(("word", "time"), WAYS)
def test_peaks_over_the_cycle(body: Ring, word: str, time: str, mean: bool) -> None:
    """On every copy no moment has more than the peak, and the moment given has just that."""
    measures = ["von mises", "magnitude", "principal stresses"]
    words = {"wave": word, "undamped": True, **({"mean": "still"} if mean else {})}
    case = body.case(words, {"time_factor": f"{time}i omega t"},
                     output={"peaks": measures, "derived": measures})  # fmt: skip
    peaks = expander.expand(case, "wave")

    def at(moment: float) -> dict[str, np.ndarray]:
        grid = expander.expand(case, "wave", moment=moment)
        principal = np.asarray(grid["stress_principal"])
        return {
            VON_MISES: np.asarray(grid[VON_MISES]),
            "displacement_magnitude": np.asarray(grid["displacement_magnitude"]),
            LARGEST: principal[:, 0],
            "stress_smallest_principal": principal[:, 2],
        }

    moments = [at(m) for m in np.arange(0.0, 360.0, 15.0)]
    for name in moments[0]:
        peak = np.asarray(peaks[f"{name}_peak"])
        sign = -1.0 if "smallest" in name else 1.0
        most = np.max([sign * m[name] for m in moments], axis=0)
        size = np.abs(peak).max()
        assert (most - sign * peak).max() <= 2e-6 * size, "a moment that is beyond the peak"
        assert (sign * peak - most).max() <= 0.05 * size, "a peak that is far beyond all moments"
        when = np.asarray(peaks[f"{name}_peak_phase"])
        for node in (3, 77, 151):
            assert at(float(when[node]))[name][node] == pytest.approx(peak[node], rel=1e-6)


def test_a_moment_with_its_mean(body: Ring) -> None:
    grid = expander.expand(body.case({"mean": "still"}), "wave", moment=50.0)
    x = np.asarray(grid.points)
    expected = body.mean_s(x).real + (body.s(x) * np.exp(1j * np.deg2rad(50.0))).real
    np.testing.assert_allclose(np.asarray(grid["stress"]), six(expected), atol=1e-12)
    assert "mean still" in " ".join(grid.field_data["time"])


def test_a_mean_with_real_arrays(body: Ring) -> None:
    """A case that is constant in time may hold one real array under the field's own name."""
    import pyvista

    file = body.folder / "still.vtu"
    grid = pyvista.read(file)
    for key, name in (("u", "displacement"), ("s", "stress")):
        grid.point_data[name] = np.array(grid.point_data.pop(f"{key}_re"))
        del grid.point_data[f"{key}_im"]
    grid.save(file)
    for order in (1, -1):  # whichever case comes first
        case = body.case({"mean": "still"})
        case = case.model_copy(update={"case": case.case[::order]})
        found = expander.expand(case, "wave", moment=50.0)
        x = np.asarray(found.points)
        expected = body.mean_u(x).real + (body.u(x) * np.exp(1j * np.deg2rad(50.0))).real
        np.testing.assert_allclose(np.asarray(found["displacement"]), expected, atol=1e-12)


def test_a_wave_with_a_real_array_is_refused(body: Ring) -> None:
    import pyvista

    grid = pyvista.read(body.folder / "wave.vtu")
    grid.point_data["displacement"] = np.array(grid.point_data.pop("u_re"))
    grid.save(body.folder / "wave.vtu")
    with pytest.raises(InputError, match="'displacement'") as caught:
        expander.expand(body.case(), "wave")
    assert "amplitude" in str(caught.value)


def test_a_mean_is_no_result_of_its_own(body: Ring) -> None:
    assert [t.result.name for t in plan(body.case({"mean": "still"})).targets] == ["wave"]


def test_a_wave_is_no_mean(body: Ring) -> None:
    raw = body.case({"mean": "wave"})
    with pytest.raises(InputError, match="constant in time"):
        expander.expand(raw, "wave")


def test_a_series_of_phases(body: Ring) -> None:
    expansion = plan(body.case(output={"phases": 12, "results": ["wave"], "file": "ring.pvd"}))
    expansion.write()
    names = [t.file.name for t in expansion.targets]
    assert names == [f"ring_wave_phase_{k:02d}.vtu" for k in range(12)]
    import pyvista

    grid = pyvista.read(expansion.targets[5].file)
    expected = (body.u(np.asarray(grid.points)) * np.exp(1j * np.deg2rad(150.0))).real
    np.testing.assert_allclose(np.asarray(grid["displacement"]), expected, atol=1e-12)


def test_a_real_result_has_no_phases(body: Ring) -> None:
    """With h = 0 and complex fields the cycle is there; a sum's real part has none."""
    case = body.case(
        sum=[{"name": "all", "terms": {"still": 1.0, "wave": 2.0}, "part": "real"}],
        output={"phases": 4},
    )
    assert [t.moment for t in plan(case).targets] == [None]
    grid = expander.expand(case, "all")
    x = np.asarray(grid.points)
    expected = body.mean_u(x).real + 2.0 * body.u(x).real
    np.testing.assert_allclose(np.asarray(grid["displacement"]), expected, atol=1e-12)


def test_complex_factors_in_a_sum(body: Ring) -> None:
    case = body.case(sum=[{"name": "late", "terms": {"wave": [0.6, -0.8], "still": [0.0, 2.0]}}])
    grid = expander.expand(case, "late")
    x = np.asarray(grid.points)
    expected = (0.6 - 0.8j) * body.u(x) + 2j * body.mean_u(x).real
    np.testing.assert_allclose(amplitude(grid, "displacement"), expected, atol=1e-12)


def test_size_of_a_mode(body: Ring) -> None:
    for word, factor in (("sector", 1 / np.sqrt(7)), ("sector, real pair", np.sqrt(2 / 7))):
        grid = expander.expand(body.case({"mode_mass": word}), "wave")
        expected = factor * body.u(np.asarray(grid.points))
        np.testing.assert_allclose(amplitude(grid, "displacement"), expected, atol=1e-12)
