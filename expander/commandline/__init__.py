"""The command line: no mechanics, only words in and words out."""

from expander.commandline.main import main

__all__ = ["main"]
