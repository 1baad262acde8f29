"""Floor 7, the command line and its TOML case."""

from flatplan.cli.main import main

__all__ = ["main"]
