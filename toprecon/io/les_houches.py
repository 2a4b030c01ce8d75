"""Les Houches event files: partons as perfect jets.

Quarks, gluons and taus of the final state become jets (b score 1 for b quarks, 0 for
others; charges are those of the parton), electrons and muons leptons, photons photons;
the neutrinos are the missing momentum. The generated pair follows from the mothers.

The form is the standard of J. Alwall et al., Comput. Phys. Commun. 176 (2007) 300,
hep-ph/0609017, with the common blocks of hep-ph/0109068.
"""

from __future__ import annotations

import gzip
import math
import re
import zlib

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError
from toprecon.events import Sample
from toprecon.io.beams import BeamFrame
from toprecon.io.generated import GeneratedParticles, find_pair
from toprecon.io.identity import opened
from toprecon.io.raw import FloatArray, RawEvents, RawHeaders, RawObjects, Reason

IntArray = NDArray[np.int64]
_BLOCK = 1 << 23
_HEADER, _PARTICLE = 6, 13  # numbers in the first line of an event, and per particle
_SEPARATOR = -1.25e300  # no quantity of an event has this value
_MARKS = re.compile(rb"<event[\s>]|</event>|</init>|</LesHouchesEvents>")
_BODY = re.compile(rb"<event(?:\s[^>]*)?>(.*?)</event>", re.DOTALL)
_EXTRA = re.compile(rb"#[^\n]*|<(\w+)(?:\s[^>]*)?>.*?</\1>|<[^>]*>", re.DOTALL)
_ELECTRON, _MUON, _TAU, _B, _GLUON, _PHOTON = 11, 13, 15, 5, 21, 22


class LesHouchesReader:
    """Reader of a Les Houches event file, plain or gzipped.

    Parameters
    ----------
    path : str
        Path or URL.
    """

    samples: tuple[Sample, ...] = ()
    optional = frozenset({"photons", "missing", "truth"})
    tree = ""

    def __init__(self, path: str) -> None:
        self.path = path
        self.notes: list[str] = []
        self.warnings: list[str] = []
        self._context = opened(path)
        self._stream, _ = self._context.__enter__()
        try:
            if self._stream.read(2) == b"\x1f\x8b":
                self._stream.seek(0)
                self._stream = gzip.GzipFile(fileobj=self._stream)
            self._starts, self._ends = self._index()
            self._beams, self._energies = self._init()
        except (OSError, EOFError, ValueError, zlib.error) as error:
            self.close()
            if isinstance(error, InputError):
                raise
            msg = f"{path}: a readable Les Houches file is required; got {error}"
            raise InputError(msg) from error
        self.n_entries = len(self._starts)
        if abs(self._beams[0]) != _ELECTRON or self._beams[0] + self._beams[1] != 0:
            self.notes.append(
                f"the beams are {self._beams[0]} and {self._beams[1]}, not e- and e+"
            )

    def close(self) -> None:
        """Close the file."""
        self._context.__exit__(None, None, None)

    def _index(self) -> tuple[IntArray, IntArray]:
        """Where events begin and end, without keeping the file."""
        self._stream.seek(0)
        starts: list[int] = []
        ends: list[int] = []
        position, rest, closed, self._head = 0, b"", False, b""
        while chunk := self._stream.read(_BLOCK):
            data = rest + chunk
            for match in _MARKS.finditer(data):
                where = position + match.start()
                mark = match[0]
                if mark == b"</init>":
                    self._head = data[: match.end()] if not position else b""
                    starts.clear()
                    ends.clear()
                elif mark == b"</event>":
                    ends.append(where + len(mark))
                elif mark == b"</LesHouchesEvents>":
                    closed = True
                else:
                    starts.append(where)
            # a mark may be cut by the end of a block
            keep = min(len(data), 32)
            last = [m.end() for m in _MARKS.finditer(data[-keep:])]
            keep -= last[-1] if last else 0
            position += len(data) - keep
            rest = data[len(data) - keep :]
        if not closed or len(starts) != len(ends):
            msg = (
                f"{self.path}: a complete Les Houches file is required; it holds "
                f"{len(starts)} beginnings and {len(ends)} ends of events and "
                f"{'an' if closed else 'no'} end of the file: cut short or damaged"
            )
            raise InputError(msg)
        begin, end = np.array(starts, np.int64), np.array(ends, np.int64)
        if np.any(begin >= end) or np.any(begin[1:] < end[:-1]):
            msg = f"{self.path}: events overlap: damaged"
            raise InputError(msg)
        return begin, end

    def _init(self) -> tuple[tuple[int, int], tuple[float, float]]:
        """Codes and energies [GeV] of the beams."""
        match = re.search(rb"<init(?:\s[^>]*)?>(.*?)</init>", self._head, re.DOTALL)
        numbers = _EXTRA.sub(b" ", match[1]).split() if match else []
        try:
            beams = (int(numbers[0]), int(numbers[1]))
            energies = (_number(numbers[2]), _number(numbers[3]))
        except (IndexError, ValueError):
            msg = (
                f"{self.path}: codes and energies of the beams are required in <init>; "
                f"got {b' '.join(numbers[:4])!r}"
            )
            raise InputError(msg) from None
        return beams, energies

    def beam_frame(self) -> tuple[BeamFrame, float] | None:
        """Return how the beams lie, and their collision energy [GeV].

        Returns
        -------
        BeamFrame and float
            The first beam goes along +z.
        """
        flipped = self._beams[0] == -_ELECTRON
        return BeamFrame(flipped), 2 * math.sqrt(self._energies[0] * self._energies[1])

    def headers(self, start: int, stop: int) -> RawHeaders:
        """Return the quantities of whole events of a range of entries."""
        return self._headers(self._numbers(start, stop))

    def _headers(self, numbers: _Numbers) -> RawHeaders:
        """Weights; the rest is not in the events."""
        return RawHeaders(
            weight=numbers.weight,
            helicity=np.zeros(len(numbers.weight), dtype=np.int8),
            sqrt_s=np.full(len(numbers.weight), np.nan),
        )

    def _numbers(self, start: int, stop: int) -> _Numbers:
        """Parse a range of entries."""
        if stop <= start:
            return _Numbers([])
        self._stream.seek(int(self._starts[start]))
        size = int(self._ends[stop - 1] - self._starts[start])
        try:
            data = self._stream.read(size)
        except (OSError, EOFError, zlib.error) as error:
            msg = f"{self.path}: entries {start} to {stop} are damaged: {error}"
            raise InputError(msg) from error
        bodies = _BODY.findall(data)
        if len(bodies) != stop - start:
            msg = (
                f"{self.path}: {stop - start} events are required from entry {start}; "
                f"got {len(bodies)}: damaged"
            )
            raise InputError(msg)
        return _Numbers(bodies)

    def read(self, start: int, stop: int) -> RawEvents:
        """Return a range of entries."""
        numbers = self._numbers(start, stop)
        pdg, final = numbers.pdg, numbers.status == 1
        code = np.abs(pdg)
        everything = RawObjects(numbers.p, numbers.counts, {"pdg": pdg})

        def pick(mask: NDArray[np.bool_]) -> RawObjects:
            return everything.keep_objects(mask & final)

        jets = pick(((code >= 1) & (code <= _B)) | (code == _GLUON) | (code == _TAU))
        charge = _charge(jets.extra["pdg"])
        is_b = np.abs(jets.extra["pdg"]) == _B
        jets.extra = {
            "btag": is_b.astype(np.float64),
            "track_charge": charge,
            "vertex_charge": np.where(is_b, charge, 0.0),
        }
        leptons = pick((code == _ELECTRON) | (code == _MUON))
        leptons.extra = {
            "charge": -np.sign(leptons.extra["pdg"]).astype(np.float64),
            "pdg": leptons.extra["pdg"].astype(np.int32),
            "isolation": np.zeros(leptons.p.shape[1]),
        }
        photons = pick(code == _PHOTON)
        photons.extra = {}
        neutrinos = pick(np.isin(code, (12, 14, 16)))
        event = np.repeat(np.arange(len(numbers.counts)), neutrinos.counts)
        n = len(numbers.counts)
        missing = np.stack(
            [
                np.bincount(event, row, minlength=n).astype(np.float64)
                for row in neutrinos.p
            ]
        )
        events = RawEvents(
            self._headers(numbers),
            {"jets": jets, "leptons": leptons, "photons": photons},
            missing,
            find_pair(numbers.generated()),
            {},
        )
        events.mark(Reason.INCONSISTENT, numbers.bad)
        return events


class _Numbers:
    """Numbers of some events as arrays.

    ``counts`` particles per event (0 where the event is ``bad``); ``pdg``, ``status``,
    ``p`` and ``mothers`` of all particles.
    """

    def __init__(self, bodies: list[bytes]) -> None:
        values, sizes, bad = _parse(bodies)
        starts = np.cumsum(sizes) - sizes
        first = np.where(bad, 0, starts)
        padded = values if len(values) >= _HEADER else np.zeros(_HEADER)
        stated = np.nan_to_num(padded[first], nan=-1.0, posinf=-1.0, neginf=-1.0)
        fits = stated * _PARTICLE + _HEADER == sizes
        self.bad = bad | ~fits | (stated < 0)
        self.counts = np.where(self.bad, 0, stated).astype(np.int64)
        self.weight = np.where(self.bad, 0.0, padded[np.where(self.bad, 0, first + 2)])
        size = self.counts * _PARTICLE
        row = np.arange(size.sum()) - np.repeat(np.cumsum(size) - size, size)
        table = padded[np.repeat(first + _HEADER, size) + row].reshape(-1, _PARTICLE)
        whole = np.nan_to_num(table[:, :4], posinf=0, neginf=0)
        whole = np.clip(whole, -(2**31), 2**31).astype(np.int64)
        self.pdg, self.status = whole[:, 0], whole[:, 1]
        self.mothers = whole[:, 2:4]
        px, py, pz, energy = table[:, 6:10].T
        self.p: FloatArray = np.stack([energy, px, py, pz])

    def generated(self) -> GeneratedParticles:
        """Return all particles with their mothers."""
        n = len(self.pdg)
        event = np.repeat(np.arange(len(self.counts)), self.counts)
        offset = (np.cumsum(self.counts) - self.counts)[event]
        parents, daughters = [], []
        for column in (0, 1):
            mother = self.mothers[:, column]
            good = (mother >= 1) & (mother <= self.counts[event])
            if column:
                good &= mother != self.mothers[:, 0]
            parents.append((mother - 1 + offset)[good])
            daughters.append(np.arange(n)[good])
        return GeneratedParticles(
            self.pdg,
            self.p,
            self.counts,
            np.concatenate(parents),
            np.concatenate(daughters),
        )


def _parse(bodies: list[bytes]) -> tuple[FloatArray, IntArray, NDArray[np.bool_]]:
    """Numbers of all events, how many each has, and which hold something else."""
    mark = f" {_SEPARATOR!r} ".encode()
    text = _EXTRA.sub(b" ", mark.join(bodies)).replace(b"D", b"E").replace(b"d", b"e")
    bad = np.zeros(len(bodies), dtype=bool)
    try:
        values = np.array(text.split(), dtype=np.float64)
    except ValueError:
        # only here, where some event is damaged, are the events looked at one by one
        parts = [_EXTRA.sub(b" ", body).split() for body in bodies]
        for i, part in enumerate(parts):
            try:
                np.array(part, dtype=np.float64)
            except ValueError:
                bad[i], parts[i] = True, []
        sizes = np.array([len(part) for part in parts], dtype=np.int64)
        joined = [token for part in parts for token in part]
        return np.array(joined, dtype=np.float64), sizes, bad
    separators = np.flatnonzero(values == _SEPARATOR)
    edges = np.concatenate([[-1], separators, [len(values)]])
    sizes = (np.diff(edges) - 1)[: len(bodies)]
    return np.delete(values, separators), sizes, bad


def _charge(pdg: IntArray) -> FloatArray:
    """Charges of quarks, taus and gluons."""
    code = np.abs(pdg)
    size = np.where(code == _GLUON, 0.0, np.where(code % 2 == 0, 2 / 3, -1 / 3))
    size[code == _TAU] = -1.0
    return size * np.sign(pdg)


def _number(token: bytes) -> float:
    """Return a number, also with the exponent letter of Fortran."""
    return float(token.replace(b"D", b"E").replace(b"d", b"e"))
