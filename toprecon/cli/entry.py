"""Arguments of the command, and one sentence for every error."""

from __future__ import annotations

import argparse
import sys
import warnings
from collections.abc import Sequence
from typing import Any

from toprecon import __version__
from toprecon.cli import commands
from toprecon.errors import TopreconError, TopreconWarning

FAILURE = 2
"""Exit code after an error of the input or the settings."""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command.

    Parameters
    ----------
    arguments : sequence of str, optional
        Those of the process if absent.

    Returns
    -------
    int
        0, or 2 after an error; the error is one sentence on the error stream.
    """
    options = parser().parse_args(arguments)
    with warnings.catch_warnings():
        warnings.simplefilter("always", TopreconWarning)
        warnings.showwarning = _show_warning
        try:
            return int(options.command(options))
        except TopreconError as error:
            print(f"toprecon: {error}", file=sys.stderr)
            return FAILURE
        except BrokenPipeError:
            return 0
        except KeyboardInterrupt:
            print("toprecon: stopped", file=sys.stderr)
            return 130


def parser() -> argparse.ArgumentParser:
    """Return the parser of all subcommands."""
    top = argparse.ArgumentParser(
        prog="toprecon",
        description="Reconstruction studies of top pairs at e+e- colliders.",
    )
    top.add_argument("--version", action="version", version=f"toprecon {__version__}")
    subcommands = top.add_subparsers(required=True, metavar="COMMAND")

    study = subcommands.add_parser(
        "study", help="reconstruct files, print the result, write the hand-off folder"
    )
    study.add_argument(
        "files",
        nargs="+",
        metavar="FILE",
        help="event files, a catalogue (TOML), or one saved event table (Parquet)",
    )
    study.add_argument("--plan", help="study plan (TOML); the default plan if absent")
    study.add_argument("--out", metavar="DIR", help="folder for the hand-off")
    study.add_argument("--layout", help="layout of the files (TOML)")
    study.add_argument(
        "--set",
        dest="settings",
        action="append",
        default=[],
        metavar="SECTION.KEY=VALUE",
        help="change one setting of the plan; may be repeated",
    )
    study.add_argument(
        "--variations",
        action="store_true",
        help="also reconstruct with other energy scales, b tags, masses and beams, and "
        "print how the results shift",
    )
    study.add_argument(
        "--json", action="store_true", help="print the result as JSON instead"
    )
    study.add_argument(
        "--replace", action="store_true", help="replace an existing hand-off folder"
    )
    study.add_argument(
        "--parts", metavar="DIR", help="keep finished parts here and go on from them"
    )
    study.add_argument(
        "--workers", type=int, default=1, help="processes that work at once"
    )
    study.set_defaults(command=commands.study)

    calibrate = subcommands.add_parser(
        "calibrate",
        help="fit the densities of right and wrong pairings, write a plan that uses them",
    )
    calibrate.add_argument(
        "files", nargs="+", metavar="FILE", help="top pairs with truth, or a catalogue"
    )
    calibrate.add_argument(
        "--plan", help="study plan (TOML); the default plan if absent"
    )
    calibrate.add_argument(
        "--out",
        metavar="PLAN",
        required=True,
        help="plan to write (TOML); the calibrations go into files beside it",
    )
    calibrate.add_argument("--layout", help="layout of the files (TOML)")
    calibrate.add_argument(
        "--set",
        dest="settings",
        action="append",
        default=[],
        metavar="SECTION.KEY=VALUE",
        help="change one setting of the plan; may be repeated",
    )
    calibrate.add_argument(
        "--score",
        choices=("ratio", "correlated", "plain"),
        default="ratio",
        help="what an assignment is judged by; 'ratio' if absent",
    )
    calibrate.set_defaults(command=commands.calibrate)

    describe = subcommands.add_parser(
        "describe", help="say what is in a file and how it would be read"
    )
    describe.add_argument("file", metavar="FILE", help="file, file:tree or URL")
    describe.add_argument("--layout", help="layout of the file (TOML)")
    describe.set_defaults(command=commands.describe)

    generate = subcommands.add_parser(
        "generate", help="make event samples from a recipe; goes on where it stopped"
    )
    generate.add_argument("recipe", metavar="RECIPE", help="recipe (TOML)")
    generate.add_argument("--out", metavar="DIR", required=True, help="folder to fill")
    generate.add_argument(
        "--part-size", type=int, default=2000, help="events made at a time"
    )
    generate.add_argument(
        "--replace",
        action="store_true",
        help="replace files of the same names that were made otherwise",
    )
    generate.add_argument(
        "--workers", type=int, default=1, help="processes that work at once"
    )
    generate.set_defaults(command=commands.generate)

    plan = subcommands.add_parser("plan", help="print the default plan, to start from")
    plan.set_defaults(command=commands.plan)

    lab = subcommands.add_parser("lab", help="open the notebooks in JupyterLab")
    lab.add_argument(
        "folder",
        nargs="?",
        help="folder to serve; the project's own if run inside its clone",
    )
    lab.add_argument("--port", type=int, default=8888, help="first port to try")
    lab.add_argument("--no-browser", action="store_true", help="only print the address")
    lab.set_defaults(command=commands.lab)
    return top


def _show_warning(message: Any, *_: Any, **__: Any) -> None:
    """Print a warning as one line."""
    print(f"toprecon: {message}", file=sys.stderr)
