"""EDM4hep events: jets, leptons, constituents, b scores and the generated pair."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError
from toprecon.events import Sample
from toprecon.io.beams import BeamFrame, beam_particles, frame_of
from toprecon.io.edm4hep_choice import (
    Choice,
    choose_collections,
    describe_tag,
    lepton_code,
)
from toprecon.io.edm4hep_collections import RECO, Block, Collections
from toprecon.io.edm4hep_tags import tag_columns, tag_scores
from toprecon.io.generated import GeneratedParticles, find_pair, links
from toprecon.io.layout import FileLayout
from toprecon.io.raw import FloatArray, RawEvents, RawHeaders, RawObjects, Reason
from toprecon.jets import jet_charge, relative_isolation

IntArray = NDArray[np.int64]
_P4 = ("energy", "momentum.x", "momentum.y", "momentum.z")
_CHARGE_EXPONENT = 0.5  # of the momentum-weighted track charge, common practice
_LOOK = 200
"""Events looked at for beam particles."""


class Edm4hepReader:
    """Reader of an EDM4hep file.

    Parameters
    ----------
    columns : Columns
        Open file.
    layout : FileLayout
        Names of collections, where they are not the usual ones.
    ids : dict
        Numbers of collections stored in the file, by name.
    """

    samples: tuple[Sample, ...] = ()

    def __init__(self, columns: Any, layout: FileLayout, ids: dict[str, int]) -> None:
        self._columns = columns
        self._options = layout.edm4hep
        self.file = Collections(columns, ids)
        self.choice: Choice = choose_collections(self.file, layout.edm4hep)
        self.tree = columns.tree
        self.n_entries = columns.n_entries
        self.notes = list(self.choice.notes)
        self.warnings: list[str] = []
        optional = {
            "particles": bool(self.choice.particles),
            "photons": bool(self.choice.photons),
            "missing": bool(self.choice.missing or self.choice.particles),
            "truth": bool(self.choice.truth),
        }
        self.optional = frozenset(name for name, has in optional.items() if has)
        self._energy: float | None = layout.edm4hep.sqrt_s
        choice = self.choice
        chosen = (*choice.leptons, choice.particles, choice.photons, choice.missing)
        self._targets = {
            name: self._target(name) for name in chosen if name in self.file.subsets
        }

    def mapped(self) -> dict[str, str]:
        """Return where every quantity comes from, for a description."""
        choice, header = self.choice, self.choice.header
        truth = choice.truth
        leptons = ", ".join(choice.leptons)
        if not leptons and choice.particles:
            leptons = f"isolated electrons and muons of {choice.particles}"
        missing = choice.missing or (
            f"initial state less {choice.particles}" if choice.particles else ""
        )
        mapped = {
            "jets": choice.jets,
            "jets.btag": "" if choice.tag.none else describe_tag(choice.tag),
            "leptons": leptons,
            "leptons.charge": leptons,
            "particles": choice.particles,
            "photons": choice.photons,
            "missing": missing,
            "truth": truth,
            "event.weight": f"{header}.weight" if header else "",
            "event.number": f"{header}.eventNumber" if header else "",
            "event.sqrt_s": choice.parameters or (f"beams in {truth}" if truth else ""),
        }
        return {name: where for name, where in mapped.items() if where}

    def close(self) -> None:
        """Close the file."""
        self._columns.close()

    def headers(self, start: int, stop: int) -> RawHeaders:
        """Return the quantities of whole events of a range of entries."""
        return self._headers(self._block(self._header_columns(), start, stop))

    def read(self, start: int, stop: int) -> RawEvents:
        """Return a range of entries."""
        block = self._block(self._all_columns(), start, stop)
        problems = {Reason.INCONSISTENT: np.zeros(block.n, dtype=bool)}
        jets = self._jets(block, problems)
        particles, position = self._particles(block, jets, problems)
        leptons = self._leptons(block, particles, position, problems)
        objects = {"jets": jets, "leptons": leptons}
        visible = None
        if particles is not None:
            if not self.choice.missing:
                visible = _sum(particles)
            isolated = particles.extra.pop("isolated").astype(bool)
            objects["particles"] = particles.keep_objects(~isolated)
        if self.choice.photons:
            photons = self._objects(block, self.choice.photons, problems)
            objects["photons"] = RawObjects(photons.p, photons.counts, {})
        missing = None
        if self.choice.missing:
            found = self._objects(block, self.choice.missing, problems)
            missing = np.full((4, block.n), np.nan)
            first = found.offsets[:-1][found.counts > 0]
            missing[:, found.counts > 0] = found.p[:, first]
        truth = find_pair(self._generated(block)) if self.choice.truth else None
        events = RawEvents(self._headers(block), objects, missing, truth, {})
        events.visible = visible
        for reason, mask in problems.items():
            events.mark(reason, mask)
        return events

    def beam_frame(self) -> tuple[BeamFrame, float] | None:
        """Return how the beams lie, and their collision energy [GeV].

        Returns
        -------
        BeamFrame and float, or None
            Medians over generated beam particles; None if the file has none.
        """
        if not self.choice.truth:
            return None
        stop = min(_LOOK, self.n_entries)
        particles = self._generated(self._block(self._truth_columns(), 0, stop))
        return frame_of(beam_particles(particles))

    def _block(self, names: Any, start: int, stop: int) -> Block:
        """Columns of a range, those that exist."""
        known = self._columns.types
        return Block(self.file, sorted(n for n in names if n in known), start, stop)

    def _header_columns(self) -> set[str]:
        """Columns of whole events."""
        header = self.choice.header
        names = {f"{header}.{m}" for m in ("eventNumber", "runNumber", "weight")}
        generator = self.choice.parameters
        return names | ({f"{generator}.sqrts"} if generator else set())

    def _truth_columns(self) -> set[str]:
        """Columns of generated particles."""
        truth = self.choice.truth
        if not truth:
            return set()
        names = {f"{truth}.{member}" for member in ("PDG", "mass", *_P4[1:])}
        for relation in ("parents", "daughters"):
            branch = self.file.relation_branch(truth, relation)
            if branch and self.file.has(truth, f"{relation}_begin"):
                names |= {f"{branch}.index", f"{branch}.collectionID"}
                names |= {f"{truth}.{relation}_begin", f"{truth}.{relation}_end"}
        return names

    def _all_columns(self) -> set[str]:
        """All columns that are read."""
        choice = self.choice
        names = self._header_columns() | self._truth_columns()
        for collection in (
            choice.jets,
            choice.particles,
            choice.photons,
            choice.missing,
            *choice.leptons,
        ):
            names |= self._object_columns(collection)
        branch = self.file.relation_branch(choice.jets, "particles")
        if branch:
            names |= {f"{branch}.index", f"{branch}.collectionID"}
            names |= {f"{choice.jets}.particles_{end}" for end in ("begin", "end")}
        names |= {f"{c}_IsolationVar" for c in choice.leptons}
        rules = (choice.tag, self._options.track_charge, self._options.vertex_charge)
        for rule in rules:
            if rule is not None:
                names |= tag_columns(self.file, choice.jets, rule)
        return names

    def _object_columns(self, collection: str) -> set[str]:
        """Columns of reconstructed particles, through a subset if it is one."""
        if not collection:
            return set()
        names = set()
        subset = self.file.subsets.get(collection)
        if subset:
            names |= {f"{subset}.index", f"{subset}.collectionID"}
        collection = self._stored(collection)
        return names | {
            f"{collection}.{member}" for member in (*_P4, "charge", "PDG", "type")
        }

    def _stored(self, collection: str) -> str:
        """Return the collection that holds the data of a collection or subset."""
        return self._targets.get(collection, collection)

    def _target(self, collection: str) -> str:
        """Return the collection that a subset points into, by its first entries."""
        branch = f"{self.file.subsets[collection]}.collectionID"
        stop = min(_LOOK, self.n_entries)
        reco = self.file.of_kind(RECO)
        if branch in self._columns.types:
            stored = self._columns.read([branch], 0, stop)[branch].values
            for number in np.unique(stored.astype(np.int64) & 0xFFFFFFFF):
                if self.file.name(int(number)) in reco:
                    return self.file.name(int(number))
        if self.choice.particles in reco:
            return self.choice.particles
        msg = (
            f"{self._columns.path}: the collection that subset {collection!r} points "
            "into is required, but is not known; name the particles in the layout"
        )
        raise InputError(msg)

    def _headers(self, block: Block) -> RawHeaders:
        """Weights, energies and numbers of events."""
        header = self.choice.header

        def first(name: str) -> NDArray[Any] | None:
            if name not in self._columns.types:
                return None
            column = block.column(name)
            assert column.counts is not None
            if not np.all(column.counts == 1):
                return None
            return column.values

        weight = first(f"{header}.weight")
        energy = np.full(block.n, np.nan if self._energy is None else self._energy)
        if self.choice.parameters and self._energy is None:
            stored = first(f"{self.choice.parameters}.sqrts")
            if stored is not None:
                energy = stored.astype(np.float64)
        number, run = first(f"{header}.eventNumber"), first(f"{header}.runNumber")
        return RawHeaders(
            weight=np.ones(block.n) if weight is None else weight.astype(np.float64),
            helicity=np.zeros(block.n, dtype=np.int8),
            sqrt_s=energy,
            run=None if run is None else run.astype(np.int64),
            number=None if number is None else number.astype(np.int64),
        )

    def _objects(
        self, block: Block, collection: str, problems: dict[Reason, Any]
    ) -> RawObjects:
        """Reconstructed particles with charge and code, through a subset if it is one."""
        subset = self.file.subsets.get(collection)
        stored = self._stored(collection)
        code = "PDG" if self.file.has(stored, "PDG") else "type"
        members = [*_P4, "charge"]
        members += [code] if self.file.has(stored, code) else []
        counts, values, bad = block.members(stored, members)
        problems[Reason.INCONSISTENT] |= bad
        p = np.stack([values[name].astype(np.float64) for name in _P4])
        pdg = values.get(code, np.zeros(p.shape[1])).astype(np.int64)
        extra = {"charge": values["charge"].astype(np.float64), "pdg": pdg}
        objects = RawObjects(p, counts, extra)
        if not subset:
            return objects
        relation = block.relation(subset)
        index = block.only_into(relation, stored)
        event = np.repeat(np.arange(block.n), relation.counts)
        good = (index >= 0) & (index < counts[event])
        where = (index + objects.offsets[:-1][event])[good]
        return RawObjects(
            p[:, where],
            np.bincount(event[good], minlength=block.n),
            {"subset_of": where, **{k: v[where] for k, v in extra.items()}},
        )

    def _jets(self, block: Block, problems: dict[Reason, Any]) -> RawObjects:
        """Jets with their b score; charges are filled in from the constituents."""
        if not self.choice.jets:
            nothing = {"btag": float, "track_charge": float, "vertex_charge": float}
            return RawObjects.none(block.n, nothing)
        jets = self._objects(block, self.choice.jets, problems)
        n = jets.p.shape[1]
        scores, bad = tag_scores(block, self.choice.jets, self.choice.tag, jets.counts)
        problems[Reason.INCONSISTENT] |= bad
        jets.extra = {"btag": scores}
        for name in ("track_charge", "vertex_charge"):
            rule = getattr(self._options, name)
            jets.extra[name] = np.full(n, np.nan)
            if rule is not None:
                jets.extra[name], bad = tag_scores(
                    block, self.choice.jets, rule, jets.counts
                )
                problems[Reason.INCONSISTENT] |= bad
        return jets

    def _particles(
        self, block: Block, jets: RawObjects, problems: dict[Reason, Any]
    ) -> tuple[RawObjects | None, IntArray]:
        """Particle-flow objects with their jets, and where each stored one went."""
        if not self.choice.particles:
            return None, np.zeros(0, dtype=np.int64)
        base = self._stored(self.choice.particles)
        objects = self._objects(block, base, problems)
        n = objects.p.shape[1]
        jet_index = np.full(n, -1, dtype=np.int64)
        branch = self.file.relation_branch(self.choice.jets, "particles")
        if branch and self.file.has(self.choice.jets, "particles_begin"):
            counts, ranges, bad = block.members(
                self.choice.jets, ("particles_begin", "particles_end")
            )
            problems[Reason.INCONSISTENT] |= bad | (counts != jets.counts)
            relation = block.relation(branch)
            jet, particle = links(
                block.only_into(relation, base),
                relation.counts,
                ranges["particles_begin"],
                ranges["particles_end"],
                counts,
                objects.counts,
            )
            starts = np.repeat(np.cumsum(counts) - counts, counts)
            jet_index[particle] = (np.arange(len(starts)) - starts)[jet]
            if (
                len(jet)
                and self._options.track_charge is None
                and np.array_equal(counts, jets.counts)
            ):
                jets.extra["track_charge"] = jet_charge(
                    objects.extra["charge"],
                    objects.p,
                    jet_index,
                    _CHARGE_EXPONENT,
                    counts=objects.counts,
                    jet_counts=jets.counts,
                )
        charge, pdg = objects.extra["charge"], np.abs(objects.extra["pdg"])
        kind = np.where(charge != 0, 0, 2)
        for code, value in ((22, 1), (11, 3), (13, 4)):
            kind[pdg == code] = value
        objects.extra = {
            "charge": charge,
            "kind": kind.astype(np.int8),
            "jet_index": jet_index.astype(np.int32),
            "isolated": np.zeros(n, dtype=np.int8),
            "pdg": objects.extra["pdg"],
        }
        if base == self.choice.particles:
            return objects, np.arange(n)
        subset = self._objects(block, self.choice.particles, problems)
        selected = np.zeros(n, dtype=bool)
        selected[subset.extra["subset_of"]] = True
        position = np.where(selected, np.cumsum(selected) - 1, -1)
        return objects.keep_objects(selected), position

    def _leptons(
        self,
        block: Block,
        particles: RawObjects | None,
        position: IntArray,
        problems: dict[Reason, Any],
    ) -> RawObjects:
        """Isolated leptons, from their collections or by isolation."""
        pdg = particles.extra.pop("pdg") if particles is not None else None
        if self.choice.leptons:
            parts = []
            for name in self.choice.leptons:
                part = self._collected(block, name, problems)
                where = part.extra.pop("subset_of", None)
                if particles is not None:
                    base = self._stored(self.choice.particles)
                    if where is not None and self._stored(name) == base:
                        mine = position[where]
                        particles.extra["isolated"][mine[mine >= 0]] = 1
                    else:
                        particles.extra["isolated"][_copies(particles, part)] = 1
                parts.append(part)
            return RawObjects.joined(parts)
        if particles is None or pdg is None:
            nothing = {"charge": float, "pdg": np.int32, "isolation": float}
            return RawObjects.none(block.n, nothing)
        rule = self._options.isolation
        with np.errstate(invalid="ignore"):
            candidate = np.isin(np.abs(pdg), (11, 13)) & (
                particles.p[0] > rule.minimum_energy
            )
        share = relative_isolation(
            particles.p, particles.counts, candidate, cone=rule.cone
        )
        chosen = candidate & (share < rule.maximum)
        particles.extra["isolated"] = chosen.astype(np.int8)
        found = RawObjects(
            particles.p,
            particles.counts,
            {
                "charge": particles.extra["charge"],
                "pdg": pdg.astype(np.int32),
                "isolation": share,
            },
        )
        return found.keep_objects(chosen)

    def _collected(
        self, block: Block, collection: str, problems: dict[Reason, Any]
    ) -> RawObjects:
        """Leptons of one collection."""
        objects = self._objects(block, collection, problems)
        charge, pdg = objects.extra["charge"], objects.extra["pdg"]
        code = lepton_code(collection)
        if code:
            known = np.abs(pdg) == code
            pdg = np.where(known, pdg, -np.sign(charge).astype(np.int64) * code)
        share = np.full(len(charge), np.nan)
        name = f"{collection}_IsolationVar"
        if name in self._columns.types:
            stored = block.column(name)
            if np.array_equal(np.asarray(stored.counts), objects.counts):
                share = stored.values.astype(np.float64)
        extra = {"charge": charge, "pdg": pdg.astype(np.int32), "isolation": share}
        if "subset_of" in objects.extra:
            extra["subset_of"] = objects.extra["subset_of"]
        return RawObjects(objects.p, objects.counts, extra)

    def _generated(self, block: Block) -> GeneratedParticles:
        """Return generated particles and their links, from both directions."""
        truth = self.choice.truth
        counts, values, _ = block.members(truth, ("PDG", "mass", *_P4[1:]))
        px, py, pz, mass = (
            values[name].astype(np.float64) for name in (*_P4[1:], "mass")
        )
        with np.errstate(all="ignore"):
            energy = np.sqrt(px * px + py * py + pz * pz + mass * mass)
        ends: list[tuple[IntArray, IntArray]] = []
        for relation in ("parents", "daughters"):
            branch = self.file.relation_branch(truth, relation)
            if not branch or not self.file.has(truth, f"{relation}_begin"):
                continue
            names = (f"{relation}_begin", f"{relation}_end")
            own, ranges, _ = block.members(truth, names)
            if not np.array_equal(own, counts):
                continue
            stored = block.relation(branch)
            begin, end = (ranges[name] for name in names)
            source, target = links(
                block.only_into(stored, truth), stored.counts, begin, end, counts
            )
            ends.append((target, source) if relation == "parents" else (source, target))
        none = np.zeros(0, dtype=np.int64)
        return GeneratedParticles(
            pdg=values["PDG"].astype(np.int64),
            p=np.stack([energy, px, py, pz]),
            counts=counts,
            parent=np.concatenate([none, *(parent for parent, _ in ends)]),
            daughter=np.concatenate([none, *(daughter for _, daughter in ends)]),
        )


def _sum(objects: RawObjects) -> FloatArray:
    """Return the summed momentum of every event, shape (4, E)."""
    n = len(objects.counts)
    event = np.repeat(np.arange(n), objects.counts)
    return np.stack([np.bincount(event, row, minlength=n) for row in objects.p])


def _copies(particles: RawObjects, others: RawObjects) -> IntArray:
    """Positions of particles that are, number by number, one of the others."""
    event = np.repeat(np.arange(len(others.counts)), others.counts)
    size = particles.counts[event]
    other = np.repeat(np.arange(len(event)), size)
    first = np.repeat(np.cumsum(size) - size, size)
    mine = np.arange(size.sum()) - first + np.repeat(particles.offsets[event], size)
    same = np.all(particles.p[1:, mine] == others.p[1:, other], axis=0)
    return mine[same]
