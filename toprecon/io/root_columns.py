"""Columns of a ROOT file: TTrees and RNTuples through uproot."""

from __future__ import annotations

import re
from collections.abc import Iterable
from typing import Any

import numpy as np

from toprecon.errors import InputError, UnknownFormatError
from toprecon.io.columns import Column, as_column
from toprecon.io.edm4hep_collections import stored_ids

USUAL_TREE = "events"
_COLLECTION = 1  # structural role of a list, RNTuple format specification


def open_root(path: str) -> Any:
    """Open a ROOT file, local or remote.

    Parameters
    ----------
    path : str
        Path or URL, without a tree.

    Returns
    -------
    uproot directory
        To be closed by the caller.

    Raises
    ------
    InputError
        If the file is missing, cut short or damaged.
    UnknownFormatError
        If it is not a ROOT file.
    """
    import uproot

    try:
        directory = uproot.open({path: None}, array_cache=None)
    except FileNotFoundError:
        msg = f"{path}: a ROOT file is required, but there is no such file"
        raise InputError(msg) from None
    except ImportError as error:
        msg = f"{path}: {error}"
        raise InputError(msg) from error
    # a damaged file can raise anything inside the reading library
    except Exception as error:
        if "not a ROOT file" in str(error):
            msg = f"{path}: a ROOT file is required, but its first bytes are not ROOT's"
            raise UnknownFormatError(msg) from None
        msg = f"{path}: a readable ROOT file is required; got {short(error)}"
        raise InputError(msg) from error
    end, actual = directory.file.fEND, _size(directory)
    if actual is not None and actual < end:
        directory.close()
        msg = (
            f"{path}: {end} bytes are required by its header; got {actual}: the file "
            "is cut short, copy it again"
        )
        raise InputError(msg)
    return directory


def trees_in(directory: Any) -> dict[str, str]:
    """Return the trees and RNTuples of a file and their classes, latest cycles."""
    return {
        name: kind or ""
        for name, kind in directory.classnames(cycle=False).items()
        if kind in {"TTree", "TNtuple", "TNtupleD"} or "RNTuple" in (kind or "")
    }


def choose_tree(trees: Iterable[str], wanted: str, *, path: str) -> str:
    """Return the tree to read.

    Parameters
    ----------
    trees : iterable of str
        Trees of the file.
    wanted : str
        The one asked for; empty for the usual or the only one.
    path : str
        For the message.

    Returns
    -------
    str
        Name of the tree.

    Raises
    ------
    InputError
        If it is not there, or the choice is not clear.
    """
    names = list(trees)
    if wanted:
        if wanted in names:
            return wanted
        listed = ", ".join(names) or "none"
        msg = f"{path}: tree {wanted!r} is required; the file holds: {listed}"
        raise InputError(msg)
    if USUAL_TREE in names:
        return USUAL_TREE
    if len(names) == 1:
        return names[0]
    if not names:
        msg = f"{path}: a tree of events is required, but the file holds none"
        raise InputError(msg)
    msg = (
        f"{path}: one tree of events is required; got {', '.join(names)}; name one as "
        f"'{path}:{names[0]}'"
    )
    raise InputError(msg)


class RootColumns:
    """Columns of one tree.

    Parameters
    ----------
    path : str
        Path or URL.
    tree : str
        Tree; empty for the usual or the only one.
    """

    def __init__(self, path: str, tree: str = "") -> None:
        self.path = path
        self._directory = open_root(path)
        try:
            trees = trees_in(self._directory)
            self.tree = choose_tree(trees, tree, path=path)
            self._is_tuple = "RNTuple" in trees[self.tree]
            self._tree = self._open_tree()
            self.types = self._types()
            self.n_entries = int(self._tree.num_entries)
        except BaseException:
            self._directory.close()
            raise

    def _open_tree(self) -> Any:
        """Return the tree itself, or raise a clear error."""
        try:
            tree = self._directory[self.tree]
            known = hasattr(tree, "num_entries")
        except Exception as error:
            msg = f"{self.path}: tree {self.tree!r} cannot be read: {short(error)}"
            raise InputError(msg) from error
        if not known:
            msg = (
                f"{self.path}: {self.tree!r} is stored as {type(tree).__name__}, which "
                "cannot be read; files older than the final RNTuple format must be "
                "converted with a current ROOT"
            )
            raise InputError(msg)
        return tree

    def _types(self) -> dict[str, str]:
        """Name and type of every column that holds numbers."""
        try:
            if self._is_tuple:
                return self._types_of_fields()
            return {
                branch.name: str(branch.typename)
                for branch in self._tree.itervalues(recursive=True)
                if len(branch.branches) == 0
            }
        except Exception as error:
            msg = f"{self.path}: columns of {self.tree!r} are damaged: {short(error)}"
            raise InputError(msg) from error

    def _types_of_fields(self) -> dict[str, str]:
        """Names and types of the leaves of an RNTuple; ``[]`` marks lists."""
        lists: dict[str, bool] = {}
        types: dict[str, str] = {}
        for key in self._tree.keys(full_paths=True):
            field = self._tree[key]
            within = lists.get(key.rpartition(".")[0], False)
            lists[key] = within or field.record.struct_role == _COLLECTION
            if not len(field.fields):
                types[key] = f"{field.typename}{'[]' if lists[key] else ''}"
        return types

    def read(self, names: Iterable[str], start: int, stop: int) -> dict[str, Column]:
        """Return columns of a range of entries.

        Parameters
        ----------
        names : iterable of str
            Columns.
        start, stop : int
            First entry, and the one after the last.

        Returns
        -------
        dict of Column
            By name.

        Raises
        ------
        InputError
            If they cannot be read.
        """
        wanted = list(dict.fromkeys(names))
        if not wanted:
            return {}
        try:
            arrays = self._arrays(wanted, start, stop)
        except InputError:
            raise
        # bad compression, impossible offsets, exhausted memory: all mean damage here
        except Exception as error:
            msg = (
                f"{self.path}: entries {start} to {stop} of {self.tree!r} are damaged: "
                f"{short(error)}"
            )
            raise InputError(msg) from error
        out = {}
        for name in wanted:
            out[name] = column = as_column(arrays[name], where=f"{self.path}: {name}")
            rows = len(column.values) if column.counts is None else len(column.counts)
            if rows != stop - start:
                msg = (
                    f"{self.path}: column {name!r} of {self.tree!r} must have "
                    f"{stop - start} entries from {start}; got {rows}: damaged"
                )
                raise InputError(msg)
        return out

    def _arrays(self, names: list[str], start: int, stop: int) -> dict[str, Any]:
        """Arrays by name; for an RNTuple column by column, which keeps them flat."""
        if self._is_tuple:
            return {
                name: self._tree[name].array(entry_start=start, entry_stop=stop)
                for name in names
            }
        chosen = set(names)
        return self._tree.arrays(
            filter_branch=lambda branch: (
                branch.name in chosen and len(branch.branches) == 0
            ),
            entry_start=start,
            entry_stop=stop,
            how=dict,
            array_cache=None,
        )

    def text(self, key: str) -> str:
        """Return a text stored beside the tree, empty if there is none."""
        if key not in self._directory:
            return ""
        return str(self._directory[key])

    def collection_ids(self) -> dict[str, int]:
        """Return the numbers of EDM4hep collections that the file stores, by name."""
        return stored_ids(self._directory)

    def close(self) -> None:
        """Close the file."""
        self._directory.close()


def short(error: BaseException) -> str:
    """Return an error of a library as one short line."""
    lines = [line.strip() for line in str(error).strip().splitlines() if line.strip()]
    text = re.sub(r"\s+", " ", lines[0]) if lines else ""
    return f"{type(error).__name__}: {text[:160]}" if text else type(error).__name__


def _size(directory: Any) -> int | None:
    """Bytes of the file, where its source tells."""
    try:
        return int(np.int64(directory.file.source.num_bytes))
    except (AttributeError, TypeError, NotImplementedError, OSError):
        return None
