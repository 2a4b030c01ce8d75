"""Events from nothing: the verb of this step."""

from __future__ import annotations

from typing import Any

import awkward as ak
import numpy as np

from toprecon.events import concatenate_events, make_events, momenta, record_of
from toprecon.generation.blocks import (
    Stream,
    blocks_of,
    check_request,
    identities,
    random_stream,
)
from toprecon.generation.options import GenerationOptions
from toprecon.generation.partons import Partons, draw_partons
from toprecon.generation.rates import describe_sample
from toprecon.generation.response import missing_momentum, respond
from toprecon.kinematics import mass

BLOCK_SIZE = 4096  # events of one random stream; changing it changes every sample


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
        Number of events.
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

    Notes
    -----
    Tree-level e+e- -> t tbar -> six fermions with full spin correlation, radiation
    along the beams in leading logarithms. One jet per quark.

    Examples
    --------
    >>> events = generate(100, seed=1)
    >>> len(events)
    100
    """
    check_request(n, seed, start)
    options = options or GenerationOptions()
    label = random_label(options)
    parts = [
        _generate_block(options, seed, block, wanted, label)
        for block, wanted in blocks_of(start, n, BLOCK_SIZE)
    ] or [_generate_block(options, seed, 0, slice(0, 0), label)]
    events = concatenate_events(parts) if len(parts) > 1 else parts[0]
    return _with_description(events, options, identities(label, seed, start, n), n)


def random_label(options: GenerationOptions) -> str:
    """Return what distinguishes independent samples of one seed."""
    return f"{options.sample_name}|{options.sqrt_s:g}|{options.helicity.name}"


def _generate_block(
    options: GenerationOptions, seed: int, block: int, wanted: slice, label: str
) -> ak.Array:
    """Generate a block as a whole and return the events wanted."""
    rng = random_stream(label, seed, block, Stream.PARTONS)
    partons = draw_partons(rng, BLOCK_SIZE, options)
    rng = random_stream(label, seed, block, Stream.RESPONSE)
    jets, leptons = respond(rng, partons, options.response)
    n = len(partons)
    fields: dict[str, Any] = {
        "jets": jets,
        "leptons": leptons,
        "missing": missing_momentum(jets, leptons, options.sqrt_s),
        "truth": truth_record(partons),
        "weight": np.ones(n),
        "sample": np.zeros(n, dtype=np.int16),
        "helicity": np.full(n, int(options.helicity), dtype=np.int8),
        "sqrt_s": np.full(n, options.sqrt_s),
    }
    return make_events(fields, ())[wanted]


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


def _with_description(
    events: ak.Array, options: GenerationOptions, ids: Any, n: int
) -> ak.Array:
    """Add the identities and the description of the sample."""
    fields = {name: events[name] for name in events.fields}
    fields["id"] = ids
    return make_events(fields, (describe_sample(options, n),))
