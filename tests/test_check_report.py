"""The report of a check: its published schema, and that its numbers are those that were found."""

from __future__ import annotations

import copy
import json
import warnings
from collections.abc import Iterator
from functools import cache
from importlib import resources
from pathlib import Path
from typing import Any

import jsonschema
import numpy as np
import pytest
from check_cases import AWKWARD, even
from meshes import box, case_of

from demo_cases import available
from expander.checking.report import CheckUp, plain, report
from expander.checkup import check

DEMOS = Path(__file__).parent.parent / "demo_cases"
SCHEMA = json.loads(
    resources.files("expander.checking").joinpath("report_schema.json").read_text("utf-8")
)
NAMES = [*(f"demo {name}" for name in available()), *AWKWARD]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("cases")


@cache
def found(name: str, folder: Path) -> CheckUp:
    if name.startswith("demo "):
        return check(DEMOS / name.removeprefix("demo ") / "case.toml")
    given = AWKWARD[name]()
    own = folder / name.replace(" ", "_")
    own.mkdir(exist_ok=True)
    return check(given.case(own), allow_nan=given.allow_nan)


@cache
def reported(name: str, folder: Path) -> dict[str, Any]:
    """The report as the command prints it."""
    return {**report(found(name, folder), "1.2.3"), "written": []}


def closed(schema: Any) -> Any:
    """The same schema with no room for keys that it does not know."""
    if isinstance(schema, list):
        return [closed(s) for s in schema]
    if not isinstance(schema, dict):
        return schema
    inner = {k: closed(v) for k, v in schema.items()}
    if isinstance(inner.get("properties"), dict) and inner.get("type") == "object":
        inner["additionalProperties"] = False
    return inner


def problems(data: Any, schema: Any = SCHEMA) -> list[str]:
    validator = jsonschema.Draft202012Validator(schema)
    return [f"{e.json_path}: {e.message[:200]}" for e in validator.iter_errors(data)]


def places(value: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    """Paths of all keys in nested tables; of a list of tables the first."""
    if isinstance(value, dict):
        for key, inner in value.items():
            yield (*path, key)
            yield from places(inner, (*path, key))
    elif isinstance(value, list) and value and isinstance(value[0], dict):
        yield from places(value[0], (*path, 0))


def numbers(value: Any) -> Iterator[Any]:
    for inner in value.values() if isinstance(value, dict) else value:
        if isinstance(inner, dict | list):
            yield from numbers(inner)
        else:
            yield inner


# --- the schema ---------------------------------------------------------------------------------


def test_the_schema_is_one() -> None:
    jsonschema.Draft202012Validator.check_schema(SCHEMA)
    assert SCHEMA["$schema"].endswith("draft/2020-12/schema")
    assert SCHEMA["properties"]["schema"]["const"] == 1


def test_every_key_is_described_typed_and_required() -> None:
    tables = 0

    def look(schema: Any, path: str) -> None:
        nonlocal tables
        for key, inner in schema.get("properties", {}).items():
            where = f"{path}.{key}"
            assert len(inner.get("description", "")) > 10, where
            assert "\n" not in inner["description"], where
            assert set(inner) & {"type", "$ref", "anyOf", "enum", "const"}, where
            look(inner, where)
        if "properties" in schema:
            tables += 1
            assert schema["type"] == "object", path
            assert sorted(schema["required"]) == sorted(schema["properties"]), path
            assert schema.get("additionalProperties", True) is True, "may be extended"
        for inner in [schema.get("items"), *schema.get("anyOf", [])]:
            if isinstance(inner, dict):
                look(inner, path)

    look(SCHEMA, "report")
    for name, inner in SCHEMA["$defs"].items():
        look(inner, name)
    assert tables > 20


@pytest.mark.parametrize("name", NAMES)
def test_reports_fit_the_schema(name: str, folder: Path) -> None:
    assert problems(reported(name, folder)) == []


@pytest.mark.parametrize("name", NAMES)
def test_the_schema_knows_every_key(name: str, folder: Path) -> None:
    """A key that is added to the report is added to the schema."""
    assert problems(reported(name, folder), closed(SCHEMA)) == []


@pytest.mark.parametrize("name", ["demo clevis", "demo rotor", "sections", "expected", "wave"])
def test_no_key_may_be_missing_or_of_another_type(name: str, folder: Path) -> None:
    whole = json.loads(json.dumps(reported(name, folder)))
    paths = list(places(whole))
    free = {"components"}  # its keys are names of components
    seen = 0
    for path in paths:
        if any(p in free for p in path[:-1]):
            continue
        for change in ("missing", "another type"):
            broken = copy.deepcopy(whole)
            table = broken
            for key in path[:-1]:
                table = table[key]
            if change == "missing":
                del table[path[-1]]
            else:
                table[path[-1]] = True if table[path[-1]] is not True else "text"
                if table[path[-1]] is True and path[-1] == "loose":
                    table[path[-1]] = 3
            assert problems(broken), f"{change}: {path}"
            seen += 1
    assert seen > 200


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("schema",), 2), (("verdict",), "fine"), (("cases",), []), (("copies",), 0),
        (("seams", 0, "kind"), "gap"), (("seams", 0, "area"), None),
        (("fields", 0, "seams"), []), (("fields", 0, "seams", 0, "measure"), "jump"),
        (("fields", 0, "seams", 0, "components", "x"), "much"),
        (("fields", 0, "seams", 0, "own"), [[1.0, 2.0, 3.0]]),
        (("fields", 0, "seams", 0, "worst_nodes"), list(range(21))),
        (("audit", "about"), [0.0, 0.0]), (("audit", "mass", "whole", "inertia"), [[1.0] * 3] * 2),
        (("audit",), {}), (("findings", 0, "weight"), "bad"), (("nodes",), 1.5),
    ],
)  # fmt: skip
def test_wrong_values_do_not_fit(path: tuple[Any, ...], value: Any, folder: Path) -> None:
    broken = json.loads(json.dumps(reported("expected", folder)))
    table = broken
    for key in path[:-1]:
        table = table[key]
    table[path[-1]] = value
    assert problems(broken)


def test_it_may_be_extended(folder: Path) -> None:
    more = {**reported("demo clevis", folder), "later": {"key": 1}}
    assert problems(more) == []
    assert problems(more, closed(SCHEMA)) != []


def test_only_the_seams(tmp_path: Path) -> None:
    given = AWKWARD["as declared"]()
    facts = {**report(check(given.case(tmp_path), seams_only=True), "1"), "written": []}
    assert facts["audit"] is None
    assert problems(facts) == []


@pytest.mark.parametrize("name", AWKWARD)
def test_nothing_overflows_on_the_way(name: str, tmp_path: Path) -> None:
    """A warning of numpy on the error stream is no message to a user."""
    given = AWKWARD[name]()
    case = given.case(tmp_path)
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        check(case, allow_nan=given.allow_nan)


# --- what JSON can hold ---------------------------------------------------------------------------


@pytest.mark.parametrize("name", NAMES)
def test_json_without_nan_and_infinity(name: str, folder: Path) -> None:
    text = json.dumps(reported(name, folder), allow_nan=False)
    assert json.loads(text) == reported(name, folder), "lists, not tuples; text keys"


@pytest.mark.parametrize("name", NAMES)
def test_only_plain_types(name: str, folder: Path) -> None:
    kinds = {type(v) for v in numbers(reported(name, folder))}
    assert kinds <= {str, int, float, bool, type(None)}


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        (np.float32(0.5), 0.5), (np.float64("inf"), None), (float("nan"), None),
        (complex(1, float("nan")), [1.0, None]),
        (np.array([2 - 1j], dtype=np.complex64), [[2.0, -1.0]]),
        (np.array([[1 + 2j]]), [[[1.0, 2.0]]]), (np.int64(7), 7), ((1, "a", None), [1, "a", None]),
        (np.array([], dtype=float), []),
    ],
)  # fmt: skip
def test_plain(value: Any, expected: Any) -> None:
    assert plain(value) == expected
    json.dumps(plain(value), allow_nan=False)


# --- that the numbers are those of the objects ----------------------------------------------------


def same(told: Any, value: Any) -> None:
    """A number, a vector or a matrix, complex or not; null where it is not finite."""
    array = np.asarray(value)
    if array.ndim:
        assert len(told) == len(array)
        for a, b in zip(told, array, strict=True):
            same(a, b)
    elif np.iscomplexobj(array):
        same(told[0], array.real)
        same(told[1], array.imag)
    elif told is None:
        assert not np.isfinite(array)
    else:
        assert told == float(array)


@pytest.mark.parametrize("name", NAMES)
def test_seams_fields_and_loads_are_those_found(name: str, folder: Path) -> None:
    check_up, told = found(name, folder), reported(name, folder)
    seams = check_up.continuity.seams
    assert [s["name"] for s in told["seams"]] == [s.name for s in seams]
    for s, seam in zip(told["seams"], seams, strict=True):
        assert s["nodes"] == len({*seam.nodes.tolist()})
        same(s["area"], sum(float(f.areas.sum()) for f in seam.faces))
        if len(seam.distance):
            same(s["worst_distance"], seam.distance.max())
            at = seam.distance[seam.nodes == s["worst_node"]].max()
            assert at == seam.distance.max()
    verdicts = check_up.continuity.verdicts
    shown = [(f["field"], f["case"], v) for f in told["fields"] for v in f["seams"]]
    assert len(shown) == len(verdicts)
    by_key = {(v.field, v.case, v.seam, v.measure): v for v in verdicts}
    assert len(by_key) == len(verdicts)
    for field, case, entry in shown:
        v = by_key[field, case, entry["seam"], entry["measure"]]
        assert entry["verdict"] == v.result
        for key, value in (("jump", v.jump), ("rms", v.rms), ("largest_value", v.scale),
                           ("relative", v.relative), ("relative_rms", v.relative_rms),
                           ("limit", v.limit), ("own", v.own), ("other", v.other),
                           ("position", v.position)):  # fmt: skip
            same(entry[key], value)
        assert (entry["times_scatter"] is None) == (v.times is None)
        assert entry["components"].keys() == v.components.keys()
        if entry["jump"] and v.measure != "kink":
            most = max(entry["components"].values())
            assert most <= entry["jump"] * (1 + 1e-12)
            assert entry["rms"] <= entry["jump"] * (1 + 1e-12)
    for entry, f in zip(told["loads"], check_up.continuity.found, strict=True):
        assert [entry[k] for k in ("seam", "case", "declared", "found", "verdict")] == [
            f.seam, f.case, f.declared, f.found, f.result,
        ]  # fmt: skip
        same(entry["residual"], f.residual)
        same(entry["best_other_residual"], f.alternative_residual)
    assert [(f["weight"], f["about"], f["words"], f["line"] or "") for f in told["findings"]] == [
        (f.weight, f.about, f.words, f.line) for f in check_up.findings
    ]


GRAVITY = ("not judged", "closed", "doubtful", "open")


@pytest.mark.parametrize("name", NAMES)
def test_verdicts_follow_from_what_is_told(name: str, folder: Path) -> None:
    told = reported(name, folder)
    weights = [f["weight"] for f in told["findings"]]
    order = ("fails", "doubts", "note")
    assert weights == sorted(weights, key=order.index)
    verdict = "failed" if "fails" in weights else "doubtful" if "doubts" in weights else "passed"
    assert told["verdict"] == verdict
    for f in told["fields"]:
        assert f["verdict"] == max((v["verdict"] for v in f["seams"]), key=GRAVITY.index)
        for v in f["seams"]:
            over = v["times_scatter"] if v["times_scatter"] is not None else v["relative"]
            if v["verdict"] == "open":
                assert over > v["limit"]
                assert v["open_nodes"] > 0
            elif v["verdict"] == "closed":
                assert over <= v["limit"]
                assert v["open_nodes"] == 0
    gravest = {v["verdict"] for f in told["fields"] for v in f["seams"]}
    gravest |= {f["verdict"] for f in told["loads"]}
    assert ("open" not in gravest) or told["verdict"] == "failed"


@pytest.mark.parametrize("name", NAMES)
def test_the_audit_is_the_one_found(name: str, folder: Path) -> None:
    check_up, told = found(name, folder), reported(name, folder)
    audit, shown = check_up.audit, told["audit"]
    assert audit is not None
    for c, entry in zip(audit.cases, shown["cases"], strict=True):
        assert entry["name"] == c.case.name
        assert len(entry["rigid_motions"]) == c.motions.count
        for t, total in zip(c.totals, entry["totals"], strict=True):
            assert (total["role"], tuple(total["fields"])) == (t.role, t.fields)
            for key, r in (("sector", t.sector), ("whole", t.body)):
                same(total[key]["force"], r.force)
                same(total[key]["moment"], r.moment)
            copies = np.array([[x or 0.0 for x in r["force"]] for r in total["copies"]])
            if np.iscomplexobj(t.body.force):
                copies = copies[..., 0] + 1j * copies[..., 1]
            if np.isfinite(t.body.force).all() and np.abs(t.body.force).max() < 1e100:
                np.testing.assert_allclose(copies.sum(axis=0), t.body.force,
                                           atol=1e-12 * t.scale[0])  # fmt: skip
            same(total["sum_of_magnitudes"]["force"], t.scale[0])
            same(total["sum_of_magnitudes"]["moment"], t.scale[1])
        if c.balanced is not None:
            assert tuple(entry["balance"]["fields"]) == c.balanced[0]
            same(entry["balance"]["relative"], c.balanced[1].relative)
    for key, p in (("sector", audit.sector_mass), ("whole", audit.carried_mass),
                   ("whole_by_cells", audit.body_mass)):  # fmt: skip
        for part in ("volume", "area", "length", "mass", "centre", "inertia"):
            same(shown["mass"][key][part], getattr(p, part))
    if check_up.continuity.sector.mesh.cell_count:
        copies = told["copies"]
        for part in ("volume", "area", "length", "mass"):
            sector, whole = (shown["mass"][k][part] for k in ("sector", "whole"))
            assert whole == pytest.approx(copies * sector, rel=1e-12)
    assert shown["pieces"]["after"] == sum(p["times"] for p in shown["pieces"]["list"])
    assert (told["nodes"], told["cells"]) == (
        check_up.continuity.sector.mesh.point_count, check_up.continuity.sector.mesh.cell_count,
    )  # fmt: skip


# --- numbers worked out by hand -------------------------------------------------------------------


def test_a_jump_by_hand(tmp_path: Path) -> None:
    """Node 4 moves 0.3 through a symmetric plane: its image moves -0.3, so the jump is 0.6 along
    x, and all others are 0. The largest value is (0, 3, 4) -> 5 on the far side."""
    sector = box((2, 2, 2))
    u = np.zeros((27, 3))
    u[4, 0], u[26] = 0.3, [0.0, 3.0, 4.0]
    case = case_of(tmp_path, sector, {"mirror": [{"normal": "x"}]}, {"displacement": u})
    told = report(check(case), "1")
    (field,) = told["fields"]
    value = next(v for v in field["seams"] if v["measure"] == "value")
    assert value["jump"] == pytest.approx(0.6)
    assert value["largest_value"] == pytest.approx(5.0)
    assert value["relative"] == pytest.approx(0.12)
    assert value["rms"] == pytest.approx(0.6 / 3.0)  # one of nine nodes: 0.6 / sqrt(9)
    assert value["components"] == pytest.approx({"x": 0.6, "y": 0.0, "z": 0.0})
    assert value["node"] == 4
    assert value["own"] == pytest.approx([0.3, 0.0, 0.0])
    assert value["other"] == pytest.approx([-0.3, 0.0, 0.0])
    assert (value["open_nodes"], value["worst_nodes"], value["verdict"]) == (1, [4], "open")
    assert value["position"] == pytest.approx(sector.points[4].tolist())
    (load,) = told["loads"]
    # Under the other word nothing but ux may stay, so the jump there is 0: it closes.
    assert load["residual"] == pytest.approx(0.12)
    assert (load["found"], load["best_other"], load["best_other_residual"]) == (
        "antisymmetric", "antisymmetric", 0.0,
    )  # fmt: skip
    assert load["ratio"] is None
    assert told["verdict"] == "failed"


def test_a_section_by_hand(folder: Path) -> None:
    """Stress xx = 5 over an area of 1, three times over (1 + 2): a pull of 15 along the normal."""
    sections = reported("sections", folder)["audit"]["sections"]
    assert [(s["name"], s["result"]) for s in sections] == [("near", "both"), ("section 2", "both")]
    near, far = sections
    assert near["force"] == pytest.approx([15.0, 0.0, 0.0], abs=1e-9)
    assert near["moment"] == pytest.approx([0.0, 0.0, 0.0], abs=1e-9)
    assert near["about"] == pytest.approx(near["centroid"])
    assert near["centroid"] == pytest.approx([0.3, 0.5, 0.5])
    assert (near["copies"], far["copies"]) == ([0], [1])
    # Across x = -0.4 with the normal -x: the image's side beyond pulls by -15 along x; about
    # (0, 1, 0) the arm is (-0.4, -0.5, 0.5): moment arm x F = (0, 0.5 F, 0.5 F), F = -15.
    assert far["force"] == pytest.approx([-15.0, 0.0, 0.0], abs=1e-9)
    assert far["moment"] == pytest.approx([0.0, -7.5, -7.5], abs=1e-9)
    assert far["about"] == [0.0, 1.0, 0.0]
    assert near["area"] == pytest.approx(1.0)


def test_totals_by_hand(folder: Path) -> None:
    """A force of 3 along z at the corner (1, 1, 1) and its image at (-1, 1, 1), moments about
    (0.1, 0.2, 0.3): arms (0.9, 0.8) and (-1.1, 0.8) across."""
    audit = reported("expected", folder)["audit"]
    assert audit["about"] == [0.1, 0.2, 0.3]
    totals = {t["role"]: t for t in audit["cases"][0]["totals"]}
    applied = totals["applied force"]
    assert applied["sector"]["force"] == pytest.approx([0.0, 0.0, 3.0])
    assert applied["sector"]["moment"] == pytest.approx([2.4, -2.7, 0.0])  # (y F, -x F)
    assert applied["copies"][1]["moment"] == pytest.approx([2.4, 3.3, 0.0])
    assert applied["whole"]["force"] == pytest.approx([0.0, 0.0, 6.0])
    assert applied["whole"]["moment"] == pytest.approx([4.8, 0.6, 0.0])
    assert applied["sum_of_magnitudes"]["force"] == pytest.approx(6.0)
    assert totals["reaction"]["whole"]["force"] == pytest.approx([0.0, 0.0, -5.8])
    balance = audit["cases"][0]["balance"]
    assert balance["fields"] == ["applied_force", "reaction"]
    assert balance["force"] == pytest.approx([0.0, 0.0, 0.2])
    mass = audit["mass"]
    assert mass["from"] == "the cells with density 1"
    assert mass["whole"]["volume"] == pytest.approx(2.0)
    assert mass["whole"]["centre"] == pytest.approx([0.0, 0.5, 0.5], abs=1e-12)
    # A block of 2 x 1 x 1 with density 1: m (b^2 + c^2) / 12 (common practice).
    inertia = np.diag([2 * 2 / 12, 2 * 5 / 12, 2 * 5 / 12])
    np.testing.assert_allclose(mass["whole"]["inertia"], inertia, atol=1e-12)
    rotation = next(m for m in audit["cases"][0]["magnitudes"] if m["of"] == "rotation")
    assert rotation["largest"] == pytest.approx(9.0 * np.sqrt(3.0))
    assert rotation["verdict"] == "absurd"


def test_a_wave_is_told_in_pairs(folder: Path) -> None:
    told = reported("wave", folder)
    assert told["cases"][0]["phase"] == "+"
    values = told["fields"][0]["seams"][0]
    assert all(len(pair) == 2 for pair in values["own"] + values["other"])
    motions = told["audit"]["cases"][0]["rigid_motions"]
    assert len(motions) == 2
    assert all(len(m["amount"]) == 2 and m["reactions_work"] is None for m in motions)


@pytest.mark.parametrize(
    "name", ["no displacement at a node", "infinite displacement", "neither at two nodes"]
)
def test_values_that_are_not_finite_are_left_out(name: str, folder: Path) -> None:
    """The other nodes are compared, and they close."""
    told = reported(name, folder)
    value, slope = told["fields"][0]["seams"]
    assert (value["measure"], slope["measure"]) == ("value", "kink")
    assert (value["verdict"], value["jump"]) == ("closed", 0.0)
    largest = np.linalg.norm(even(box((3, 2, 2)).points)[1:-1], axis=1).max()
    assert value["largest_value"] == pytest.approx(largest)
    # What is not known is no motion of the body as a whole.
    share = told["audit"]["cases"][0]["rigid_share"]
    usual = reported("as declared", folder)["audit"]["cases"][0]["rigid_share"]
    assert share == pytest.approx(usual, abs=0.05)
