"""Opening event files: from names to the description of a source."""

from __future__ import annotations

import glob
import math
import os
import re
from collections.abc import Mapping, Sequence
from pathlib import Path, PurePosixPath
from typing import Any

from toprecon.errors import InputError, OptionError, nearest
from toprecon.events import Helicity, Sample
from toprecon.io.formats import as_layout
from toprecon.io.layout import FileLayout
from toprecon.io.scanning import Request, describe_source
from toprecon.io.source import EventSource

Paths = str | os.PathLike[str]


def open_events(
    paths: Paths | Sequence[Paths] | Mapping[str, Any] | None = None,
    *,
    layout: FileLayout | Paths | None = None,
    catalogue: Any = None,
    strict: bool = False,
    process: str | None = None,
    helicity: Helicity | str | None = None,
    sqrt_s: float | None = None,
) -> EventSource:
    """Open event files.

    The headers, weights and identities of all files are looked at now; the events are
    read chunk by chunk later.

    Parameters
    ----------
    paths : path, list of paths, or mapping of sample names to paths
        Files, patterns (``*``), ``file:tree``, or URLs. Without a mapping every file
        is a sample named by its stem. One ``.toml`` file is a catalogue.
    layout : FileLayout or path, optional
        What the columns mean; by default the files are recognised.
    catalogue : Catalogue or path, optional
        Samples with their files, instead of ``paths``.
    strict : bool
        Whether an entry that is no event is an error.
    process, helicity, sqrt_s : optional
        What is known of all the files: name of the process (``"ttbar"`` is the
        signal), LR, RL or MIXED beams, nominal collision energy [GeV].

    Returns
    -------
    EventSource
        The events.

    Raises
    ------
    OptionError
        If both paths and a catalogue are given, or neither, or a value is not known.
    InputError
        If a file is missing, damaged, or contradicts what is said about it.
    """
    if isinstance(paths, (list, tuple)) and len(paths) == 1:
        (paths,) = paths  # it may be a catalogue
    if isinstance(paths, str | os.PathLike) and Path(paths).suffix == ".toml":
        paths, catalogue = None, catalogue if catalogue is not None else paths
    if (paths is None) == (catalogue is None):
        msg = "open_events: files or a catalogue are required; got " + (
            "neither" if paths is None else "both"
        )
        raise OptionError(msg)
    known = _known(process, helicity, sqrt_s)
    if catalogue is not None:
        from toprecon.io.catalogue import as_catalogue

        if layout is not None or known:
            msg = (
                "open_events: a catalogue says layout, process, helicity and sqrt_s "
                "itself; do not give them again"
            )
            raise OptionError(msg)
        requests = as_catalogue(catalogue).requests()
    else:
        assert paths is not None
        chosen = as_layout(layout)
        requests = [
            Request(path, tree, chosen, Sample(name, **known), frozenset(known))
            for name, path, tree in named_files(paths)
        ]
    return EventSource(describe_source(requests, strict=strict))


def _known(
    process: str | None, helicity: Helicity | str | None, sqrt_s: float | None
) -> dict[str, Any]:
    """Collect what the caller says of all samples."""
    known: dict[str, Any] = {}
    if process is not None:
        known["process"] = process
    if helicity is not None:
        if isinstance(helicity, str):
            if helicity not in Helicity.__members__:
                hint = nearest(helicity, Helicity.__members__)
                msg = f"helicity: must be LR, RL or MIXED; got {helicity!r}{hint}"
                raise OptionError(msg)
            helicity = Helicity[helicity]
        known["helicity"] = helicity
    if sqrt_s is not None:
        if not (math.isfinite(sqrt_s) and sqrt_s > 0):
            msg = f"sqrt_s: must be > 0 GeV; got {sqrt_s!r}"
            raise OptionError(msg)
        known["sqrt_s"] = float(sqrt_s)
    return known


def named_files(
    paths: Paths | Sequence[Paths] | Mapping[str, Any],
) -> list[tuple[str, str, str]]:
    """Return (sample name, path, tree) of all files asked for.

    Parameters
    ----------
    paths : path, list of paths, or mapping of sample names to paths
        As in :func:`open_events`.

    Returns
    -------
    list of tuple
        Patterns expanded and sorted.

    Raises
    ------
    InputError
        If nothing is asked for, or two files would be one sample by their names.
    """
    if isinstance(paths, Mapping):
        named = [
            (str(name), *file) for name, part in paths.items() for file in expand(part)
        ]
    else:
        named = [(stem(path), path, tree) for path, tree in expand(paths)]
        seen: dict[str, str] = {}
        for name, path, _ in named:
            if seen.setdefault(name, path) != path:
                msg = (
                    f"{path}: files without a catalogue need different names, because "
                    f"they name their samples; got {name!r} again ({seen[name]}); give "
                    "{sample name: files}"
                )
                raise InputError(msg)
    if not named:
        msg = "open_events: at least one file is required; got none"
        raise InputError(msg)
    return named


def expand(
    paths: Paths | Sequence[Paths], base: Path | None = None
) -> list[tuple[str, str]]:
    """Return (path, tree) of files given as paths, patterns, ``file:tree`` or URLs.

    Parameters
    ----------
    paths : path or list of paths
        What was asked for.
    base : Path, optional
        Folder that relative paths start from.

    Returns
    -------
    list of tuple
        In the order given; files of a pattern sorted by name.

    Raises
    ------
    InputError
        If a pattern fits no file.
    """
    if isinstance(paths, str | os.PathLike):
        paths = [paths]
    files = []
    for item in paths:
        path, tree = split_tree(os.fspath(item))
        if "://" not in path:
            path = str((base / path) if base is not None else Path(path))
            if not Path(path).exists() and any(c in path for c in "*?["):
                found = sorted(glob.glob(path, recursive=True))  # noqa: PTH207 (absolute patterns)
                if not found:
                    msg = f"{path}: a pattern for files is required; it fits none"
                    raise InputError(msg)
                files += [(name, tree) for name in found]
                continue
        files.append((path, tree))
    return files


def split_tree(path: str) -> tuple[str, str]:
    """Return path and tree of ``file.root:tree``; the tree is empty without one."""
    if "://" not in path and Path(path).exists():
        return path, ""
    match = re.fullmatch(r"(.+\.root):([^:]+)", path)
    return (match[1], match[2]) if match else (path, "")


def stem(path: str) -> str:
    """Return the name of a file without folders and suffixes."""
    name = PurePosixPath(path.split("?", maxsplit=1)[0]).name or path
    for suffix in (".gz", ".root", ".parquet", ".lhe"):
        name = name.removesuffix(suffix)
    return name
