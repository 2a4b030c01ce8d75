"""What every subcommand does."""

from __future__ import annotations

import argparse
import contextlib
import json
import multiprocessing
import os
import subprocess
import sys
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path
from typing import Any

from toprecon import study as study_room
from toprecon.errors import InputError, MissingPackageError, OptionError
from toprecon.study import (
    Recipe,
    StudyPlan,
    VariationShifts,
    calibrate_plan,
    check_target,
    check_variable,
    produce,
    result_text,
    run_study,
    variation_shifts,
)

FIRST_NOTEBOOK = Path("notebooks") / "01_first_look.ipynb"


def study(options: argparse.Namespace) -> int:
    """Carry out a study.

    Parameters
    ----------
    options : Namespace
        Arguments of ``toprecon study``.

    Returns
    -------
    int
        0.
    """
    plan = StudyPlan.load(options.plan) if options.plan else StudyPlan()
    plan = plan.with_settings(dict(_setting(text) for text in options.settings))
    if options.out:
        check_target(Path(options.out), replace=options.replace)
    if options.variations:
        check_variable(options.files)
    arguments: dict[str, Any] = {
        "layout": options.layout,
        "parts": options.parts,
        "progress": _progress(),
    }
    with _executor(options.workers) as executor:
        result = run_study(options.files, plan, executor=executor, **arguments)
    shifts = _variations(options, plan) if options.variations else None
    if options.out:
        folder = result.hand_off(
            options.out, replace=options.replace, variations=shifts
        )
        print(f"hand-off written to {folder}", file=sys.stderr)
    if options.json:
        data = result.to_mapping()
        if shifts is not None:
            data["variations"] = shifts.to_mapping()
        print(json.dumps(data, allow_nan=False))
    else:
        print(result_text(result))
        if shifts is not None:
            print(f"\n{shifts}")
    return 0


def _variations(options: argparse.Namespace, plan: StudyPlan) -> VariationShifts:
    """Carry out the usual variations of a study."""
    return variation_shifts(
        options.files, plan, layout=options.layout, progress=_progress()
    )


def calibrate(options: argparse.Namespace) -> int:
    """Calibrate the pairing of a plan.

    Parameters
    ----------
    options : Namespace
        Arguments of ``toprecon calibrate``.

    Returns
    -------
    int
        0.

    Raises
    ------
    InputError
        If the plan to write is there already.
    """
    if Path(options.out).exists():
        msg = f"{options.out}: a new file is required, but this exists; choose another"
        raise InputError(msg)
    plan = StudyPlan.load(options.plan) if options.plan else StudyPlan()
    plan = plan.with_settings(dict(_setting(text) for text in options.settings))
    found = calibrate_plan(
        options.files,
        plan,
        score=options.score,
        layout=options.layout,
        progress=_progress(),
    )
    path = found.plan.save(options.out)
    print(found)
    print(f"plan written to {path}", file=sys.stderr)
    return 0


def describe(options: argparse.Namespace) -> int:
    """Print what is in a file and a layout to start from; returns 0."""
    print(study_room.describe(options.file, layout=options.layout))
    return 0


def generate(options: argparse.Namespace) -> int:
    """Make the samples of a recipe.

    Parameters
    ----------
    options : Namespace
        Arguments of ``toprecon generate``.

    Returns
    -------
    int
        0.
    """
    recipe = Recipe.load(options.recipe)
    terminal = sys.stderr.isatty()

    def show(name: str, done: int, total: int) -> None:
        if terminal or done == total:
            end = "\n" if done == total else ""
            text = f"\r{name}: {done} of {total} events"
            print(text, end=end, file=sys.stderr, flush=True)

    with _executor(options.workers) as executor:
        samples = produce(
            recipe,
            options.out,
            part_size=options.part_size,
            replace=options.replace,
            progress=show,
            executor=executor,
        )
    for sample in samples:
        print(
            f"{sample.path}  {sample.stored} of {sample.generated} events  "
            f"content {sample.checksum[:16]}"
        )
    return 0


def plan(_: argparse.Namespace) -> int:
    """Print the default plan; returns 0."""
    print(StudyPlan().to_toml(), end="")
    return 0


def lab(options: argparse.Namespace) -> int:
    """Serve a folder with JupyterLab: token on, loopback only.

    Parameters
    ----------
    options : Namespace
        Arguments of ``toprecon lab``.

    Returns
    -------
    int
        Exit code of the server.

    Raises
    ------
    InputError
        Outside a clone, if no folder is given, or if the folder does not exist.
    MissingPackageError
        If JupyterLab is not installed.
    """
    folder = Path(options.folder) if options.folder else _clone()
    if folder is None:
        msg = (
            "lab: a folder to serve is required outside a clone of the project; run "
            "'toprecon lab FOLDER'"
        )
        raise InputError(msg)
    if not folder.is_dir():
        msg = f"lab: a folder is required; {str(folder)!r} is none"
        raise InputError(msg)
    try:
        import jupyterlab  # noqa: F401
    except ImportError as error:
        msg = (
            "lab: JupyterLab is required, but not installed; run "
            "pip install -e '.[lab]' in the clone"
        )
        raise MissingPackageError(msg) from error
    command = [
        *(sys.executable, "-m", "jupyterlab", "--ip=127.0.0.1"),
        f"--port={options.port}",
        f"--ServerApp.root_dir={folder.resolve()}",
    ]
    if (folder / FIRST_NOTEBOOK).is_file():
        command.append(f"--LabApp.default_url=/lab/tree/{FIRST_NOTEBOOK.as_posix()}")
    if options.no_browser:
        command.append("--no-browser")
    if getattr(os, "geteuid", lambda: 1)() == 0:  # the server refuses root otherwise
        command.append("--allow-root")
    return subprocess.run(command, check=False).returncode


def _executor(workers: int) -> Any:
    """Context of an executor for several processes, or of none for one process."""
    if workers < 1:
        msg = f"--workers: must be >= 1; got {workers}"
        raise OptionError(msg)
    if workers == 1:
        return contextlib.nullcontext()
    # spawned, not forked: threads and libraries start clean in each process
    context = multiprocessing.get_context("spawn")
    return ProcessPoolExecutor(workers, mp_context=context)


def _clone() -> Path | None:
    """Folder of the clone that the command is run in, if it is."""
    here = Path.cwd()
    for folder in (here, *here.parents):
        if (folder / FIRST_NOTEBOOK).is_file() and (folder / "toprecon").is_dir():
            return folder
    return None


def _setting(text: str) -> tuple[str, str]:
    """Split ``section.key=value``."""
    path, sign, value = text.partition("=")
    if not sign or not path:
        msg = f"--set: SECTION.KEY=VALUE is required; got {text!r}"
        raise OptionError(msg)
    return path.strip(), value.strip()


def _progress() -> Callable[[int, int], None] | None:
    """Progress on the error stream of a terminal, nothing elsewhere."""
    if not sys.stderr.isatty():
        return None

    def show(done: int, total: int) -> None:
        end = "\n" if done == total else ""
        print(f"\r{done} of {total} chunks", end=end, file=sys.stderr, flush=True)

    return show
