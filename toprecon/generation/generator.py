"""Events from nothing: the verb of this step."""

from __future__ import annotations

import dataclasses
from typing import Any

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.events import (
    Sample,
    concatenate_events,
    make_events,
    momenta,
    record_of,
    with_samples,
)
from toprecon.generation.backgrounds import describe_background
from toprecon.generation.blocks import (
    Stream,
    blocks_of,
    check_request,
    identities,
    random_stream,
)
from toprecon.generation.chain import background_events, missing_truth, showered_pairs
from toprecon.generation.options import GenerationOptions, Process, Simulation
from toprecon.generation.partons import Partons, draw_partons
from toprecon.generation.rates import describe_sample
from toprecon.generation.response import missing_momentum, respond
from toprecon.kinematics import mass

# events of one random stream; changing a number changes every sample
BLOCK_SIZE = 4096
SHOWER_BLOCK_SIZE = 256


def generate(
    n: int,
    options: GenerationOptions | None = None,
    *,
    seed: int = 0,
    start: int = 0,
) -> ak.Array:
    """Generate events with truth and the response of a detector.

    Event k of a sample depends only on the options, the seed and k, so a sample can
    be generated in any chunks and continued at any time.

    Parameters
    ----------
    n : int
        Number of events; for a background the number of collisions, of which those
        that pass the preselection are returned.
    options : GenerationOptions, optional
        What to generate; 500 GeV, e-L e+R, lepton+jets if absent.
    seed : int
        Seed of the sample.
    start : int
        Number of the first event.

    Returns
    -------
    ak.Array, shape (n,)
        Unweighted Events with truth; the sample with its cross section is attached.

    Raises
    ------
    OptionError
        If a number is negative or not whole.
    MissingPackageError
        If the shower is asked for and Pythia 8 is not installed.

    Notes
    -----
    Tree-level e+e- -> t tbar -> six fermions with full spin correlation, radiation
    along the beams in leading logarithms. One jet per quark, or with
    ``simulation="shower"`` Pythia 8, a parametric detector and Durham jets.

    Examples
    --------
    >>> events = generate(100, seed=1)
    >>> len(events)
    100
    """
    check_request(n, seed, start)
    options = options or GenerationOptions()
    showered = options.simulation is Simulation.SHOWER
    size = SHOWER_BLOCK_SIZE if showered else BLOCK_SIZE
    make = _showered_block if showered else _parton_block
    wanted = list(blocks_of(start, n, size)) or [(0, slice(0, 0))]
    parts = [make(_Block(options, seed, number, rows)) for number, rows in wanted]
    events = concatenate_events(parts) if len(parts) > 1 else parts[0]
    return with_samples(events, (describe(options, n),))


def describe(options: GenerationOptions, n: int) -> Sample:
    """Return the description of a sample, also of one generated in chunks.

    Parameters
    ----------
    options : GenerationOptions
        Settings of the sample.
    n : int
        Events generated in all chunks together; for a background, collisions.

    Returns
    -------
    Sample
        With cross sections [fb] that include the branching fraction of the decays.
        Collisions dropped by the preselection count as entries.
    """
    if options.process is Process.TTBAR:
        return describe_sample(options, n)
    return describe_background(options, n)


def random_label(options: GenerationOptions) -> str:
    """Return what distinguishes independent samples of one seed."""
    return f"{options.sample_name}|{options.sqrt_s:g}|{options.helicity.name}"


@dataclasses.dataclass(frozen=True)
class _Block:
    """A block of events and the rows of it that are wanted."""

    options: GenerationOptions
    seed: int
    number: int
    rows: slice

    def stream(self, purpose: Stream) -> np.random.Generator:
        label = random_label(self.options)
        return random_stream(label, self.seed, self.number, purpose)

    def ids(self, size: int) -> NDArray[np.uint64]:
        """Identities of the events wanted."""
        first = self.number * size + self.rows.start
        label = random_label(self.options)
        return identities(label, self.seed, first, self.rows.stop - self.rows.start)


def _parton_block(block: _Block) -> ak.Array:
    """Generate a block with one jet per quark."""
    options = block.options
    partons = draw_partons(block.stream(Stream.PARTONS), BLOCK_SIZE, options)
    jets, leptons = respond(block.stream(Stream.RESPONSE), partons, options.response)
    objects = {"jets": jets[block.rows], "leptons": leptons[block.rows]}
    truth = truth_record(partons.take(block.rows))
    return _assemble(options, objects, truth, block.ids(BLOCK_SIZE))


def _showered_block(block: _Block) -> ak.Array:
    """Generate the wanted events of a block with shower, detector and jets."""
    options, ids = block.options, block.ids(SHOWER_BLOCK_SIZE)
    if options.process is Process.TTBAR:
        stream = block.stream(Stream.SHOWERED_PARTONS)
        partons = draw_partons(stream, SHOWER_BLOCK_SIZE, options).take(block.rows)
        showered = showered_pairs(partons, ids, options)
        truth = truth_record(partons)
    else:
        showered = background_events(ids, options)
        truth = missing_truth(len(ids))
    events = _assemble(options, showered.fields, truth, ids)
    return events if showered.keep.all() else events[showered.keep]


def _assemble(
    options: GenerationOptions,
    objects: dict[str, ak.Array],
    truth: ak.Array,
    ids: NDArray[np.uint64],
) -> ak.Array:
    """Add what all events have, without a description of the sample."""
    n = len(ids)
    fields: dict[str, Any] = {
        **objects,
        "missing": missing_momentum(
            objects["jets"], objects["leptons"], options.sqrt_s
        ),
        "truth": truth,
        "weight": np.ones(n),
        "sample": np.zeros(n, dtype=np.int16),
        "helicity": np.full(n, int(options.helicity), dtype=np.int8),
        "sqrt_s": np.full(n, options.sqrt_s),
        "id": ids,
    }
    return make_events(fields, ())


def truth_record(partons: Partons) -> ak.Array:
    """Return the truth of generated pairs.

    Parameters
    ----------
    partons : Partons
        Generated pairs.

    Returns
    -------
    ak.Array, shape (E,)
        The momenta of the truth record, ``sqrt_s_prime``, and ``electron_loss`` and
        ``positron_loss``: energies that the beams lack at the collision [GeV].
    """
    fields: dict[str, Any] = {
        name: momenta(p, **({"pdg": partons.pdg[name]} if name in partons.pdg else {}))
        for name, p in partons.momenta.items()
    }
    fields["sqrt_s_prime"] = mass(partons.momenta["top"] + partons.momenta["antitop"])
    fields["electron_loss"], fields["positron_loss"] = partons.lost
    return record_of(fields)
