"""The check of a case: seams, loads and the whole body."""

from __future__ import annotations

from pathlib import Path

from expander.auditing import audit
from expander.casefile import CaseFile, read_case
from expander.checking.continuity import continuity
from expander.checking.findings import findings
from expander.checking.report import CheckUp
from expander.phases import decided
from expander.referencing import referenced
from expander.sector import Step, read_sector


def check(
    case: CaseFile | Path | str,
    skip_undeclared: bool = False,
    allow_nan: bool = False,
    seams_only: bool = False,
    step: Step = lambda words: None,
) -> CheckUp:
    """Check that the seams of a case close and that the whole body hangs together.

    Parameters
    ----------
    case : a case file, or a case that was read.
    seams_only : leave out the audit of the whole body.
    step : called with a few words before each slow part, for a progress display.

    Raises
    ------
    InputError
        For anything wrong with the case or its models. What the data say against the case is no
        error: it is in the findings.
    """
    if not isinstance(case, CaseFile):
        case = read_case(Path(case))
    sector = referenced(decided(read_sector(case, skip_undeclared, allow_nan, step)))
    seams = continuity(sector, step)
    chis = {c.case.name: c.chi for c in seams.cases}
    body = None if seams_only else audit(sector, chis, step)
    return CheckUp(seams, body, tuple(findings(seams, body)))
