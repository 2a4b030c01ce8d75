"""Collections of an EDM4hep file, whoever wrote it.

What a collection is follows from the members it has, never from a version number.
Relations are found in both conventions: ``_C_R.index`` with the name of the relation,
and ``C#i.index`` with its position in the schema.
"""

from __future__ import annotations

import contextlib
import dataclasses
from collections.abc import Iterable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError
from toprecon.io.collection_ids import collection_id
from toprecon.io.columns import Column, Columns

IntArray = NDArray[np.int64]

RECO, GENERATED, IDENTIFICATION, HEADER = (
    "reco",
    "generated",
    "identification",
    "header",
)
PARAMETERS = "parameters"
_MEMBERS = {
    GENERATED: {"generatorStatus", "PDG", "momentum.x", "mass"},
    RECO: {"energy", "momentum.x", "momentum.y", "momentum.z", "charge"},
    IDENTIFICATION: {"algorithmType", "likelihood"},
    HEADER: {"eventNumber", "runNumber"},
    PARAMETERS: {"sqrts"},
}
_POSITIONS = {
    (GENERATED, "parents"): 0,
    (GENERATED, "daughters"): 1,
    (RECO, "particles"): 2,
    (RECO, "particleIDs"): 3,
}
"""Positions of relations in the older convention, in schema order."""


def is_edm4hep(types: dict[str, str]) -> bool:
    """Return whether columns, with their types, look like EDM4hep."""
    kinds = set(classify(types).values())
    return RECO in kinds or GENERATED in kinds


def classify(types: dict[str, str]) -> dict[str, str]:
    """Return the kind of every collection whose members are known."""
    members: dict[str, set[str]] = {}
    for name, kind in types.items():
        collection, dot, member = name.partition(".")
        # members are lists; single numbers of such a name are counters of a writer
        if (
            dot
            and not kind.replace("_t", "").isalnum()
            and not name.startswith("_")
            and "#" not in collection
        ):
            members.setdefault(collection, set()).add(member)
    out = {}
    for collection, found in members.items():
        for kind, needed in _MEMBERS.items():
            if needed <= found:
                out[collection] = kind
                break
    return out


@dataclasses.dataclass(frozen=True)
class Relation:
    """Targets of a relation: positions within the event, and their collections."""

    index: Column
    collection: Column | None

    @property
    def counts(self) -> IntArray:
        """Entries per event."""
        assert self.index.counts is not None
        return self.index.counts


class Collections:
    """Look-ups in an open file.

    Parameters
    ----------
    columns : Columns
        Open file.
    ids : dict
        Collection numbers stored in the file, by name; missing ones are computed.
    """

    def __init__(self, columns: Columns, ids: dict[str, int]) -> None:
        self.columns = columns
        self.kinds = classify(columns.types)
        self._ids = ids
        self.subsets = {
            name.rsplit(suffix, 1)[0]: name.rsplit(".", 1)[0]
            for name in columns.types
            for suffix in ("_objIdx.index", "#0.index")
            if name.endswith(suffix)
            and name.rsplit(suffix, 1)[0] not in self.kinds
            and not self._has_members(name.rsplit(suffix, 1)[0])
        }
        self._names = {self.number(name): name for name in self.kinds}
        self.known_numbers = np.array([*self._names, *ids.values()], dtype=np.int64)

    def _has_members(self, collection: str) -> bool:
        """Whether a collection has data of its own."""
        start = f"{collection}."
        return any(name.startswith(start) for name in self.columns.types)

    def of_kind(self, kind: str) -> list[str]:
        """Return the collections of a kind, in the order of the file."""
        return [name for name, found in self.kinds.items() if found == kind]

    def number(self, collection: str) -> int:
        """Return the number that stands for a collection in relations."""
        return self._ids.get(collection, collection_id(collection))

    def name(self, number: int) -> str:
        """Return the collection that a number stands for, empty if not known."""
        return self._names.get(int(number), "")

    def has(self, collection: str, member: str) -> bool:
        """Return whether a member is stored."""
        return f"{collection}.{member}" in self.columns.types

    def relation_branch(self, collection: str, relation: str) -> str:
        """Return the branch of a relation without its member, empty if not stored."""
        name = f"_{collection}_{relation}"
        if f"{name}.index" in self.columns.types:
            return name
        position = _POSITIONS.get((self.kinds.get(collection, ""), relation))
        name = f"{collection}#{position}"
        if position is not None and f"{name}.index" in self.columns.types:
            return name
        return ""

    def vector_branch(self, collection: str, member: str, position: int) -> str:
        """Return the branch of a vector member, empty if not stored."""
        for name in (f"_{collection}_{member}", f"{collection}_{position}"):
            if name in self.columns.types:
                return name
        return ""


class Block:
    """Columns of one range of entries of a file.

    Parameters
    ----------
    collections : Collections
        The file.
    names : iterable of str
        Columns to read.
    start, stop : int
        First entry, and the one after the last.
    """

    def __init__(
        self, collections: Collections, names: Iterable[str], start: int, stop: int
    ) -> None:
        self.file = collections
        self.n = stop - start
        self._values = collections.columns.read(names, start, stop)

    def column(self, name: str) -> Column:
        """Return a column with its counts."""
        column = self._values.get(name)
        if column is None:
            msg = (
                f"{self.file.columns.path}: column {name!r} is required, but is missing"
            )
            raise InputError(msg)
        if column.counts is None:
            msg = f"{self.file.columns.path}: {name}: a list per event is required"
            raise InputError(msg)
        return column

    def members(
        self, collection: str, names: Iterable[str]
    ) -> tuple[IntArray, dict[str, NDArray[Any]], NDArray[np.bool_]]:
        """Return members of a collection that must agree in length.

        Parameters
        ----------
        collection : str
            Collection.
        names : iterable of str
            Members.

        Returns
        -------
        array of int, shape (E,)
            Objects per event; 0 where the members disagree.
        dict of array, shape (N,)
            Members.
        array of bool, shape (E,)
            Where they disagree.
        """
        columns = {name: self.column(f"{collection}.{name}") for name in names}
        counts = next(iter(columns.values())).counts
        assert counts is not None
        different = np.zeros(self.n, dtype=bool)
        for column in columns.values():
            if column.counts is not counts:
                different |= column.counts != counts
        if not different.any():
            return counts, {k: c.values for k, c in columns.items()}, different
        values = {
            name: column.values[np.repeat(~different, np.asarray(column.counts))]
            for name, column in columns.items()
        }
        return np.where(different, 0, counts), values, different

    def relation(self, branch: str) -> Relation:
        """Return a relation by its branch."""
        number = f"{branch}.collectionID"
        stored = number in self._values
        index = self.column(f"{branch}.index")
        return Relation(index, self.column(number) if stored else None)

    def only_into(self, relation: Relation, collection: str) -> IntArray:
        """Return the targets of a relation; -1 for those in other collections.

        Where the file stores no numbers, or none of them is known, all targets count.

        Parameters
        ----------
        relation : Relation
            Targets.
        collection : str
            The collection wanted.

        Returns
        -------
        array of int, shape (R,)
            Positions within the event.
        """
        index = relation.index.values.astype(np.int64)
        if relation.collection is None or len(relation.collection.values) != len(index):
            return index
        numbers = relation.collection.values.astype(np.int64) & 0xFFFFFFFF
        if not np.isin(numbers[index >= 0], self.file.known_numbers).any():
            return index
        return np.where(numbers == self.file.number(collection), index, -1)


def stored_ids(directory: Any) -> dict[str, int]:
    """Return the numbers of collections that a ROOT file stores, by name.

    Parameters
    ----------
    directory : uproot directory
        Open file.

    Returns
    -------
    dict
        Empty if there is no table that can be read.
    """
    places = (
        ("podio_metadata", "events___CollectionTypeInfo.{}", "collectionID", "name"),
        (
            "podio_metadata",
            "events___CollectionTypeInfo/events___CollectionTypeInfo.{}",
            "collectionID",
            "name",
        ),
        ("podio_metadata", "events___idTable/{}", "m_collectionIDs", "m_names"),
        ("metadata", "CollectionIDs/{}", "m_collectionIDs", "m_names"),
    )
    for tree, pattern, number, name in places:
        # no such table, or one in a form that the library cannot read: the numbers
        # are computed from the names instead
        with contextlib.suppress(Exception):
            table = directory[tree]
            numbers = table[pattern.format(number)].array()[0]
            names = table[pattern.format(name)].array()[0]
            return {
                str(key): int(value) & 0xFFFFFFFF
                for key, value in zip(names, numbers, strict=True)
            }
    return {}
