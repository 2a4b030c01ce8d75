"""What is inside a file, what of it is understood, and a layout to start from."""

from __future__ import annotations

import dataclasses
import os
from typing import Any

from toprecon.io.branches import mapped_columns
from toprecon.io.columns import Columns
from toprecon.io.edm4hep_collections import is_edm4hep
from toprecon.io.edm4hep_reader import Edm4hepReader
from toprecon.io.formats import (
    PARQUET_MAGIC,
    ROOT_MAGIC,
    as_layout,
    first_bytes,
    open_reader,
)
from toprecon.io.guess import guess_layout
from toprecon.io.identity import fingerprint
from toprecon.io.layout import FileLayout, Format
from toprecon.io.opening import split_tree
from toprecon.io.own_layout import SAMPLES_KEY
from toprecon.io.parquet_files import ParquetColumns
from toprecon.io.root_columns import RootColumns, open_root, trees_in

WANTED = (
    "jets",
    "jets.btag",
    "leptons",
    "leptons.charge",
    "missing",
    "particles",
    "truth",
    "event.weight",
    "event.number",
    "event.sqrt_s",
    "event.helicity",
)
"""What a study can use; what of it is absent is listed as missing."""

_SHOWN = 40


@dataclasses.dataclass(frozen=True)
class FileDescription:
    """What is inside a file.

    Parameters
    ----------
    path : str
        The file.
    kind : str
        Its format, in words.
    tree : str
        Tree looked at.
    trees : tuple of str
        All trees of the file.
    entries : int
        Entries of the tree.
    columns : dict
        Name -> type of every column.
    mapped : dict
        Quantity of Events -> where it comes from.
    missing : tuple of str
        Quantities that the file does not give.
    layout : FileLayout, or None
        The layout that would be used, or a proposal; None if jets are not found.
    notes : tuple of str
        What should be known.
    fingerprint : str
        Hash of the content.
    """

    path: str
    kind: str
    tree: str
    trees: tuple[str, ...]
    entries: int
    columns: dict[str, str]
    mapped: dict[str, str]
    missing: tuple[str, ...]
    layout: FileLayout | None
    notes: tuple[str, ...]
    fingerprint: str

    def __str__(self) -> str:
        tree = f", tree {self.tree!r}" if self.tree else ""
        lines = [f"{self.path}: {self.kind}{tree}, {self.entries} entries"]
        if len(self.trees) > 1:
            lines.append(f"  trees: {', '.join(self.trees)}")
        lines += [f"  {quantity} <- {where}" for quantity, where in self.mapped.items()]
        if self.missing:
            lines.append(f"  missing: {', '.join(self.missing)}")
        used = set(self.mapped.values())
        unused = [f"{n} ({t})" for n, t in self.columns.items() if n not in used]
        if unused:
            more = f", and {len(unused) - _SHOWN} more" if len(unused) > _SHOWN else ""
            lines.append(f"  not used: {', '.join(unused[:_SHOWN])}{more}")
        lines += [f"  {note}" for note in self.notes]
        if self.layout is not None:
            lines += ["", "# layout to start from", self.layout.to_toml().rstrip()]
        return "\n".join(lines)

    def to_mapping(self) -> dict[str, Any]:
        """Return plain data, the layout as TOML."""
        data = dataclasses.asdict(dataclasses.replace(self, layout=None))
        data["layout"] = None if self.layout is None else self.layout.to_toml()
        return data


def describe(
    path: str | os.PathLike[str],
    *,
    layout: FileLayout | str | os.PathLike[str] | None = None,
) -> FileDescription:
    """Describe what is inside a file.

    Parameters
    ----------
    path : path
        File, ``file:tree`` or URL.
    layout : FileLayout or path, optional
        Layout to try; by default the file is recognised, or a layout is proposed.

    Returns
    -------
    FileDescription
        Columns, mapping, what is missing, a layout to start from.

    Raises
    ------
    InputError
        If the file is missing or damaged.
    UnknownFormatError
        If it is no event file at all.
    """
    name, tree = split_tree(os.fspath(path))
    chosen = as_layout(layout)
    head = first_bytes(name)
    if head[:4] == ROOT_MAGIC:
        with_trees = open_root(name)
        trees = tuple(trees_in(with_trees))
        with_trees.close()
        wanted = tree or (chosen.tree if chosen is not None else "")
        columns: RootColumns | ParquetColumns = RootColumns(name, wanted)
    elif head[:4] == PARQUET_MAGIC:
        trees, columns = (), ParquetColumns(name)
    else:
        return _les_houches(name, tree, chosen)
    try:
        kind, found, mapped, notes = _understood(columns, chosen)
        return FileDescription(
            path=name,
            kind=kind,
            tree=columns.tree,
            trees=trees,
            entries=columns.n_entries,
            columns=dict(columns.types),
            mapped=mapped,
            missing=_missing(mapped),
            layout=found,
            notes=tuple(notes),
            fingerprint=fingerprint(name),
        )
    finally:
        columns.close()


def _understood(
    columns: RootColumns | ParquetColumns, layout: FileLayout | None
) -> tuple[str, FileLayout | None, dict[str, str], list[str]]:
    """Format, layout, mapping and notes of a file of columns."""
    kind = "Parquet" if isinstance(columns, ParquetColumns) else "ROOT"
    if layout is None and columns.text(SAMPLES_KEY):
        reader, own = open_reader(columns.path, columns.tree)
        reader.close()
        samples = ", ".join(sample.name for sample in reader.samples)
        notes = [f"samples: {samples}"]
        return f"{kind}, own layout", own, mapped_columns(own), notes
    if isinstance(columns, RootColumns) and (
        (layout is None and is_edm4hep(columns.types))
        or (layout is not None and layout.format is Format.EDM4HEP)
    ):
        layout = layout or FileLayout(name="EDM4hep", format=Format.EDM4HEP)
        reader = Edm4hepReader(columns, layout, columns.collection_ids())
        return f"{kind}, EDM4hep", layout, reader.mapped(), list(reader.notes)
    if layout is not None:
        return kind, layout, mapped_columns(layout), _problems(columns, layout)
    guess = guess_layout(columns)
    note = (
        "proposed by the names of the columns; check it and save it"
        if guess.layout is not None
        else "no columns of jets are known by their names; write a layout by hand"
    )
    return f"{kind}, unknown layout", guess.layout, guess.mapped, [note]


def _problems(columns: Columns, layout: FileLayout) -> list[str]:
    """Columns that a layout asks for and the file lacks."""
    lacking = sorted(set(mapped_columns(layout).values()) - set(columns.types))
    return [f"not in the file: {', '.join(lacking)}"] if lacking else []


def _missing(mapped: dict[str, str]) -> tuple[str, ...]:
    """Quantities of interest without a source."""
    return tuple(
        name
        for name in WANTED
        if not any(key == name or key.startswith(f"{name}.") for key in mapped)
        and not (name.startswith("leptons") and _has_split_leptons(mapped, name))
    )


def _has_split_leptons(mapped: dict[str, str], name: str) -> bool:
    """Whether electrons or muons, listed apart, stand for leptons."""
    rest = name.removeprefix("leptons")
    return any(
        key.startswith(f"{kind}{rest}")
        for kind in ("electrons", "muons")
        for key in mapped
    )


def _les_houches(path: str, tree: str, layout: FileLayout | None) -> FileDescription:
    """Describe a file without columns."""
    reader, layout = open_reader(path, tree, layout)
    reader.close()
    mapped = {
        "jets": "quarks, gluons and taus of the final state",
        "jets.btag": "1 for b quarks",
        "leptons": "electrons and muons of the final state",
        "leptons.charge": "particle code",
        "missing": "neutrinos",
        "photons": "photons of the final state",
        "truth": "mothers of the particles",
        "event.weight": "XWGTUP",
        "event.sqrt_s": "energies of the beams",
    }
    return FileDescription(
        path,
        "Les Houches",
        "",
        (),
        reader.n_entries,
        {},
        mapped,
        _missing(mapped),
        layout,
        tuple(reader.notes),
        fingerprint(path),
    )
