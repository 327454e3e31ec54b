"""Mutants made by hand: sign rules flipped and checks dropped, each of which a test must notice.

`mutants.toml` lists them. Each is applied to a copy of the sources, never to the sources, and the
tests named beside it are run there; they have to fail. Run from anywhere:

    python tests/mutants.py                # all; exit status 1 if one survives or is stale
    python tests/mutants.py --list
    python tests/mutants.py --only seam    # those with this word in name or file
"""

from __future__ import annotations

import argparse
import os
import re
import shutil
import signal
import subprocess
import sys
import tempfile
import time
import tomllib
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
LIST = Path(__file__).with_name("mutants.toml")
NEEDED = ("expander", "viewer", "demo_cases", "tests", "pyproject.toml", "README.md")
KEYS = {"name", "file", "find", "replace", "tests"}
TEST_SECONDS = 60  # for one test: a mutant may well run forever
MUTANT_SECONDS = 300


@dataclass(frozen=True)
class Mutant:
    """One change to the sources.

    Attributes
    ----------
    name : the rule that is broken, in plain words.
    file : relative to the repository.
    find, replace : exact texts; `find` occurs once.
    tests : test files or node ids that must notice.
    """

    name: str
    file: str
    find: str
    replace: str
    tests: tuple[str, ...]

    def apply(self, folder: Path) -> str:
        """Change the copy in `folder`; what is wrong with the entry, if anything."""
        path = folder / self.file
        if not path.is_file():
            return f"there is no {self.file}"
        text = path.read_text(encoding="utf-8")
        count = text.count(self.find)
        if count != 1:
            return f"the text to find occurs {count} times in {self.file}"
        changed = text.replace(self.find, self.replace)
        if path.suffix == ".py":
            try:
                compile(changed, self.file, "exec")
            except SyntaxError as error:
                return f"the changed {self.file} is no Python: {error.msg}, line {error.lineno}"
        path.write_text(changed, encoding="utf-8")
        for compiled in path.parent.glob(f"__pycache__/{path.stem}.*.pyc"):
            compiled.unlink()  # it could pass for that of the changed file
        return ""


@dataclass(frozen=True)
class Outcome:
    """What became of a mutant: "noticed", "SURVIVED" or "stale", and by which test or why."""

    word: str
    why: str
    seconds: float


def read_list(path: Path) -> list[Mutant]:
    """The mutants of a list.

    Raises
    ------
    SystemExit
        If an entry lacks a key, has an unknown one, or shares its name with another.
    """
    mutants = []
    for number, table in enumerate(tomllib.loads(path.read_text(encoding="utf-8"))["mutant"], 1):
        if set(table) != KEYS or not table["tests"] or table["find"] == table["replace"]:
            raise SystemExit(f"{path.name}: entry {number}, {table.get('name')!r}, is incomplete.")
        mutants.append(Mutant(**{**table, "tests": tuple(table["tests"])}))
    names = [m.name for m in mutants]
    twice = sorted({n for n in names if names.count(n) > 1})
    if twice:
        raise SystemExit(f"{path.name}: two mutants are called {twice[0]!r}.")
    return mutants


def copy_to(folder: Path) -> Path:
    """The files that the tests need, in a new folder."""
    unneeded = shutil.ignore_patterns("__pycache__", ".*", "benchmarks")
    for name in NEEDED:
        source = ROOT / name
        if source.is_dir():
            shutil.copytree(source, folder / name, ignore=unneeded)
        else:
            shutil.copy2(source, folder / name)
    return folder


def run(folder: Path, *arguments: str) -> subprocess.CompletedProcess[str]:
    """Python in a copy; processes that tests start use the copy too."""
    environment = {k: v for k, v in os.environ.items() if not k.startswith("PYTEST_")}
    environment["PYTHONPATH"] = str(folder)
    return subprocess.run(
        [sys.executable, *arguments], cwd=folder, env=environment, timeout=MUTANT_SECONDS,
        text=True, stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, stderr=subprocess.STDOUT,
    )  # fmt: skip


def run_tests(folder: Path, *arguments: str, workers: int = 0) -> subprocess.CompletedProcess[str]:
    options = ["-x", "-q", "-p", "no:cacheprovider", "--tb=line", "-rfE"]
    options += ["-o", f"timeout={TEST_SECONDS}", "-n", str(workers)]
    return run(folder, "-m", "pytest", *options, *arguments)


def check_unchanged(folder: Path, mutants: list[Mutant], jobs: int) -> None:
    """The tests must run the copy, and pass on it: one that fails anyway notices nothing."""
    where = run(folder, "-c", "import expander, viewer; print(expander.__file__, viewer.__file__)")
    if where.stdout.count(str(folder)) != 2:
        raise SystemExit(f"The copy in {folder} is not what is imported there:\n{where.stdout}")
    tests = sorted({t for m in mutants for t in m.tests})
    for ran in (
        run_tests(folder, "--collect-only", *tests),  # names the tests that are not there
        run_tests(folder, *tests, workers=jobs if jobs > 1 else 0),
    ):
        if ran.returncode:
            raise SystemExit(f"{ran.stdout}\nThe tests do not pass without mutants; mend them.")


def outcome_of(mutant: Mutant, unchanged: Path) -> Outcome:
    """Apply one mutant to a copy of its own and run its tests there."""
    start = time.perf_counter()
    with tempfile.TemporaryDirectory(prefix="seamfold-mutant-") as name:
        folder = Path(name).resolve() / "copy"
        shutil.copytree(unchanged, folder)  # with the compiled files of what does not change
        wrong = mutant.apply(folder)
        if wrong:
            return Outcome("stale", wrong, time.perf_counter() - start)
        try:
            ran = run_tests(folder, *mutant.tests)
        except subprocess.TimeoutExpired:
            return Outcome("noticed", "does not come to an end", time.perf_counter() - start)
    seconds = time.perf_counter() - start
    failed = re.search(r"^(?:FAILED|ERROR) (.*)", ran.stdout, re.M)
    if ran.returncode == 0:
        return Outcome("SURVIVED", ", ".join(mutant.tests), seconds)
    if failed is None:  # no test failed: none was found, or pytest itself could not go on
        return Outcome("stale", ran.stdout.strip()[-300:], seconds)
    return Outcome("noticed", failed[1], seconds)


def outcomes(mutants: list[Mutant], unchanged: Path, jobs: int) -> Iterator[Outcome]:
    """In the order of the list."""
    with ThreadPoolExecutor(jobs) as pool:
        try:
            yield from pool.map(lambda m: outcome_of(m, unchanged), mutants)
        finally:
            pool.shutdown(wait=False, cancel_futures=True)


def main() -> int:
    parser = argparse.ArgumentParser(description=(__doc__ or "").partition("\n")[0])
    parser.add_argument("--list", action="store_true", help="show the mutants, run nothing")
    parser.add_argument("--only", metavar="WORD", help="mutants with this word in name or file")
    parser.add_argument("--jobs", type=int, default=2, metavar="N", help="at the same time (2)")
    parser.add_argument("--keep-going", action=argparse.BooleanOptionalAction, default=True,
                        help="go on after a mutant that was not noticed (default)")  # fmt: skip
    given = parser.parse_args()
    word = (given.only or "").lower()
    mutants = [m for m in read_list(LIST) if word in m.name.lower() or word in m.file]
    if not mutants:
        parser.error(f"no mutant has the word {given.only!r}")
    if given.list:
        for m in mutants:
            print(f"{m.file:32} {m.name}\n{'':32}   {' '.join(m.tests)}")
        print(f"{len(mutants)} mutants")
        return 0

    signal.signal(signal.SIGTERM, lambda *_: sys.exit(143))  # so that copies are removed
    start = time.perf_counter()
    counts = {"noticed": 0, "SURVIVED": 0, "stale": 0}
    with tempfile.TemporaryDirectory(prefix="seamfold-mutants-") as name:
        unchanged = copy_to(Path(name).resolve())
        check_unchanged(unchanged, mutants, given.jobs)
        print(f"without mutants all tests pass ({time.perf_counter() - start:.0f} s)", flush=True)
        found = outcomes(mutants, unchanged, given.jobs)
        for m, outcome in zip(mutants, found, strict=True):
            counts[outcome.word] += 1
            print(f"{outcome.word:8} {outcome.seconds:5.1f} s  {m.name}\n{'':20}{outcome.why}",
                  flush=True)  # fmt: skip
            if outcome.word != "noticed" and not given.keep_going:
                break
        found.close()
    total = ", ".join(f"{count} {word}" for word, count in counts.items())
    print(f"{len(mutants)} mutants: {total}; {time.perf_counter() - start:.0f} s")
    return 1 if counts["SURVIVED"] or counts["stale"] else 0


if __name__ == "__main__":
    sys.exit(main())
