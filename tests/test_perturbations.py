"""Some forty random perturbations of fields that close; `perturbations.py` makes any number."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from closing_fields import RANK, closing, probes, setting, stored, turned, unstored
from openings import MAKERS
from perturbations import GOOD, Outcome, outcomes_of, summary

SEED = 4
SECTORS = range(12)


@pytest.mark.parametrize("number", SECTORS)
@pytest.mark.parametrize("kind", RANK)
def test_fields_close_by_hand(number: int, kind: str) -> None:
    rng = np.random.default_rng([SEED, number])
    s = setting(rng)
    points = s.sector.points.astype(float)
    values = closing(rng, s, kind)(points)
    size = np.abs(values).max()
    assert len(s.pairs)
    # Coordinates in single precision are known to 1e-6 of the model.
    allowed = (1e-4 if s.sector.points.dtype == np.float32 else 1e-9) * size
    for g in np.unique(s.pairs[:, 1]):
        i, _, j = s.pairs[s.pairs[:, 1] == g].T
        brought = s.chi[g] * turned(kind, s.copies[g, :3, :3], values[j])
        np.testing.assert_allclose(values[i], brought, atol=allowed)


@pytest.mark.parametrize("number", SECTORS)
def test_components_are_stored_and_read_back(number: int) -> None:
    rng = np.random.default_rng([SEED, number])
    s = setting(rng)
    for p in probes(rng, s)[0]:
        again = stored(p.kind, unstored(p.kind, p.values, p.bases), p.bases)
        np.testing.assert_allclose(again, p.values, atol=1e-12 * p.scale)


@pytest.mark.parametrize("number", SECTORS)
@pytest.mark.parametrize("measure", MAKERS)
def test_what_is_opened_is_found_and_what_closes_is_not(
    number: int, measure: str, tmp_path: Path
) -> None:
    count = 2 if measure != "traction" else 4
    found = list(outcomes_of(SEED, number, count, tmp_path, measure))
    wrong = [o for o in found if o.outcome not in GOOD]
    assert not wrong, "\n".join(map(str, wrong))


def test_the_summary_counts_every_perturbation() -> None:
    one = Outcome(0, "", "", "u", "value", "node 3", "1", 20.0, "s", "open", 3, "3", "found")
    lines = summary([one, one])
    assert lines[0].split() == ["value", "node", "10", "limits", "or", "more", "2", "found"]
