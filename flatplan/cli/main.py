"""The command line: ``flatplan CASE.toml`` plans, confirms, judges and writes the files for the field."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from pathlib import Path

from flatplan import __version__

GOOD, NOT_GOOD, BAD_INPUT = 0, 1, 2
_COMMANDS = ("plan", "template")

_DESCRIPTION = """\
Plan how to pump so that pore pressure at a distant boundary follows a wanted history.

  flatplan plan example --into out        run the shipped example
  flatplan template > my-case.toml        start a case of your own from it
  flatplan my-case.toml --into out        the same as: flatplan plan my-case.toml --into out
"""

_EXIT = """\
exit codes: 0 realizable and confirmed; 1 not realizable or not confirmed (files are written all the same);
2 bad input, nothing is written.
"""


def parser() -> argparse.ArgumentParser:
    """The parser of the command line."""
    top = argparse.ArgumentParser(
        prog="flatplan", description=_DESCRIPTION, epilog=_EXIT, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    top.add_argument("--version", action="version", version=f"flatplan {__version__}")
    commands = top.add_subparsers(dest="command", required=True, metavar="{plan,template}")
    plan = commands.add_parser(
        "plan", help="plan, confirm, judge and write the files", epilog=_EXIT, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    plan.add_argument("case", help='a TOML case file, or "example" for the shipped one')
    plan.add_argument("--into", metavar="FOLDER", help="output folder; made if it is not there (default: the case's name with -plan)")
    plan.add_argument("--quiet", action="store_true", help="print nothing but errors")
    commands.add_parser("template", help="print the shipped example, to start a case from")
    return top


def main(argv: Sequence[str] | None = None) -> int:
    """Run the command line.

    Parameters
    ----------
    argv : sequence of str, optional
        Arguments; those of the process by default.

    Returns
    -------
    int
        Exit code: 0 realizable and confirmed, 1 not, 2 bad input.
    """
    arguments = list(sys.argv[1:] if argv is None else argv)
    if arguments and not arguments[0].startswith("-") and arguments[0] not in _COMMANDS:
        arguments.insert(0, "plan")
    options = parser().parse_args(arguments)
    if options.command == "template":
        from flatplan.cli.case import example_text

        sys.stdout.write(example_text())
        return GOOD
    return _plan(options)


def _is_file(folder: Path) -> bool:
    try:
        return folder.exists() and not folder.is_dir()
    except OSError as error:
        raise ValueError(f"--into: {str(folder)[:60]} cannot be used ({error.strerror}).") from None


def _plan(options: argparse.Namespace) -> int:
    from flatplan.cli.case import read_case
    from flatplan.cli.planning import run, write_outputs
    from flatplan.cli.words import closing

    try:
        case = read_case(options.case)
        folder = Path(options.into) if options.into else Path(f"{Path(options.case).stem}-plan")
        if _is_file(folder):
            raise ValueError(f"--into: {folder} is a file; it takes a folder.")
        say = (lambda words: None) if options.quiet else (lambda words: print(f"  {words} ...", file=sys.stderr))
        try:
            outcome = run(case, say)
        except ValueError as error:
            raise case.refused(error) from None
    except ValueError as error:
        print(f"flatplan: {error}", file=sys.stderr)
        return BAD_INPUT
    try:
        written = write_outputs(case, outcome, folder)
    except OSError as error:
        print(f"flatplan: --into: {folder} cannot be written ({error.strerror or error}).", file=sys.stderr)
        return BAD_INPUT
    if not options.quiet:
        print(closing(case, outcome, written))
    return GOOD if outcome.good else NOT_GOOD
