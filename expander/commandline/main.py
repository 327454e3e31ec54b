"""The `seamfold` command: finds its subcommands, turns problems into one message and a status.

Nothing heavy is imported here: `seamfold --help` must answer at once.
"""

from __future__ import annotations

import io
import os
import signal
import sys
from importlib.metadata import entry_points
from typing import Any

import click

from expander.errors import SeamfoldError

# Commands of packages that build on the expander are found by name, never imported from here.
_GROUP = "seamfold.commands"


class Commands(click.Group):
    """Subcommands that are imported when they are named."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return sorted({e.name for e in entry_points(group=_GROUP)})

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        for entry in entry_points(group=_GROUP):
            if entry.name == cmd_name:
                command = entry.load()
                assert isinstance(command, click.Command)
                return command
        return None


@click.group(cls=Commands, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="seamfold", message="seamfold %(version)s")
def seamfold() -> None:
    """Results of a half, quarter, wedge or cyclic-sector model, made into those of the whole body.

    \b
    Example:
      seamfold expand bracket.toml
      seamfold expand bracket.vtu --mirror x --output whole.vtu
      seamfold demo

    Exit status: 0 done, 1 a check failed, 2 bad input or a refused case.
    """


def _terminated(*_: Any) -> None:
    raise KeyboardInterrupt  # so that unfinished files are removed


def main() -> None:
    """Entry point of the console command."""
    signal.signal(signal.SIGTERM, _terminated)
    if hasattr(signal, "SIGPIPE"):
        # The table is printed when the files are whole: a reader that stops is no failed check.
        signal.signal(signal.SIGPIPE, signal.SIG_DFL)
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):  # a terminal may not know every letter
            stream.reconfigure(errors="backslashreplace")
    try:
        seamfold(standalone_mode=False)
    except SeamfoldError as problem:
        _say(f"seamfold: {problem}")
        sys.exit(problem.exit_status)
    except click.ClickException as problem:
        problem.show()
        sys.exit(2)
    except (KeyboardInterrupt, click.Abort):
        _say("seamfold: stopped; nothing was left behind.")
        sys.exit(130)
    except MemoryError:
        _say("seamfold: not enough memory for this model; nothing was written.")
        sys.exit(2)
    except Exception as problem:
        if os.environ.get("SEAMFOLD_TRACE"):
            raise
        _say(
            f"seamfold: an unexpected problem, please report it: {type(problem).__name__}: "
            f"{problem}\n  Set SEAMFOLD_TRACE=1 to see where."
        )
        sys.exit(2)


def _say(text: str) -> None:
    print(text, file=sys.stderr)
