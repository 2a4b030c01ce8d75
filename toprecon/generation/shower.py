"""Parton shower and hadronisation with Pythia 8.

Every event has its own seed, made of its identity: an event does not depend on those
before it.
"""

from __future__ import annotations

import functools
from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from toprecon.errors import InputError, MissingPackageError
from toprecon.generation.counters import Purpose, words
from toprecon.generation.feed import LesHouchesRow, les_houches_events
from toprecon.generation.heavyflavour import HEAVY
from toprecon.generation.options import GenerationOptions, Process
from toprecon.generation.particles import Particles
from toprecon.generation.partons import Partons

LARGEST_SEED = 900_000_000  # of Pythia's own random numbers
ATTEMPTS = 20
_QUIET = ("Print:quiet = on", "Random:setSeed = on", "Random:seed = 1")
_PAIR_SETTINGS = (
    "Beams:frameType = 5",  # events come from us
    "PDF:lepton = off",
    "PartonLevel:ISR = off",
    "PartonLevel:MPI = off",
    "LesHouches:setQuarkMass = 0",  # keep our momenta
    "LesHouches:setLeptonMass = 0",
)
_PROCESS_SETTINGS = {
    Process.WW: ("WeakDoubleBoson:ffbar2WW = on",),
    Process.ZZ: ("WeakDoubleBoson:ffbar2gmZgmZ = on", "WeakZ0:gmZmode = 2"),
    Process.BB: (
        "WeakSingleBoson:ffbar2gmZ = on",
        "23:onMode = off",
        "23:onIfAny = 5",
    ),
    Process.QQ: (
        "WeakSingleBoson:ffbar2gmZ = on",
        "23:onMode = off",
        "23:onIfAny = 1 2 3 4",
    ),
}


def shower_pairs(
    partons: Partons, ids: NDArray[np.uint64], options: GenerationOptions
) -> Particles:
    """Shower, hadronise and decay generated pairs.

    Parameters
    ----------
    partons : Partons
        Generated pairs.
    ids : array of uint64, shape (E,)
        Identities of the events.
    options : GenerationOptions
        Energy and spread of the beams.

    Returns
    -------
    Particles
        All final particles; their momenta add up to the two beams.
    """
    beam_energy = _beam_energy(options)
    pythia, feed = _pair_generator(beam_energy)
    events = les_houches_events(partons, beam_energy)

    def prepare(i: int) -> None:
        feed.rows = events[i]

    return _run(pythia, ids, prepare)


def simulate_background(
    ids: NDArray[np.uint64], options: GenerationOptions
) -> Particles:
    """Simulate collisions of a background process.

    Parameters
    ----------
    ids : array of uint64, shape (E,)
        Identities of the events.
    options : GenerationOptions
        Process and energy.

    Returns
    -------
    Particles
        All final particles.
    """
    pythia = background_generator(
        options.process, options.sqrt_s, options.minimum_sqrt_s_prime
    )
    return _run(pythia, ids, lambda _: None)


def _beam_energy(options: GenerationOptions) -> float:
    """Beam energy that no collision reaches: 8 standard deviations of the spread."""
    return options.sqrt_s / 2 * (1 + 8 * options.energy_spread) + 0.01


def _run(
    pythia: Any, ids: NDArray[np.uint64], prepare: Callable[[int], None]
) -> Particles:
    """Generate one event per identity and collect the final particles."""
    zeros = np.zeros(len(ids), dtype=np.int64)
    seeds = words(ids, zeros, Purpose.SHOWER_SEED) % np.uint64(LARGEST_SEED - ATTEMPTS)
    final: list[tuple[float, ...]] = []
    heavy: list[tuple[float, ...]] = []
    counts, heavy_counts = [], []
    for i, seed in enumerate(seeds.tolist()):
        prepare(i)
        _next_event(pythia, seed)
        before, heavy_before = len(final), len(heavy)
        for q in pythia.event:
            if q.isFinal():
                final.append((q.id(), q.e(), q.px(), q.py(), q.pz()))
            elif q.idAbs() in HEAVY:
                heavy.append((q.id(), q.e(), q.px(), q.py(), q.pz()))
        counts.append(len(final) - before)
        heavy_counts.append(len(heavy) - heavy_before)
    pdg, p4 = _columns(final)
    heavy_pdg, heavy_p4 = _columns(heavy)
    return Particles(
        p4,
        pdg,
        np.array(counts, dtype=np.int64),
        heavy_p4,
        heavy_pdg,
        np.array(heavy_counts, dtype=np.int64),
    )


def _next_event(pythia: Any, seed: int) -> None:
    """Generate the event of a seed; the few that fail are tried with the next seed."""
    for attempt in range(ATTEMPTS):
        pythia.rndm.init(1 + seed + attempt)
        if pythia.next():
            return
    msg = (
        f"generate: Pythia 8 gave no event in {ATTEMPTS} attempts; check the energy and "
        "the masses in the options"
    )
    raise InputError(msg)


def _columns(rows: list[tuple[float, ...]]) -> tuple[NDArray[np.int64], NDArray[Any]]:
    """Codes and momenta (4, N) of a list of particles."""
    table = np.array(rows, dtype=np.float64).reshape(-1, 5).T
    return table[0].astype(np.int64), np.ascontiguousarray(table[1:])


@functools.lru_cache(maxsize=2)
def _pair_generator(beam_energy: float) -> tuple[Any, Any]:
    """Return Pythia reading events from us, and what feeds it."""
    pythia8 = load_pythia()

    class Feed(pythia8.LHAup):  # type: ignore[name-defined]
        """Hands one event of ours to Pythia."""

        rows: Sequence[LesHouchesRow] = ()

        def setInit(self) -> bool:
            self.setBeamA(11, beam_energy, 0, 0)
            self.setBeamB(-11, beam_energy, 0, 0)
            self.setStrategy(3)  # unweighted events
            self.addProcess(1, 1.0, 0.0, 1.0)
            return True

        def setEvent(self, idProc: int = 0) -> bool:  # noqa: ARG002
            self.setProcess(1, 1.0, 2 * beam_energy, 1 / 137.0, 0.1)
            for row in self.rows:
                self.addParticle(*row)
            return True

    pythia = pythia8.Pythia("", False)
    feed = Feed()
    _configure(pythia, (*_QUIET, *_PAIR_SETTINGS))
    pythia.setLHAupPtr(feed)
    _initialise(pythia)
    return pythia, feed


@functools.lru_cache(maxsize=4)
def background_generator(
    process: Process, sqrt_s: float, minimum_mass: float, *, hadrons: bool = True
) -> Any:
    """Return Pythia set up for a background process with radiation of the beams."""
    pythia = load_pythia().Pythia("", False)
    settings = (
        "Beams:idA = 11",
        "Beams:idB = -11",
        f"Beams:eCM = {sqrt_s!r}",
        f"PhaseSpace:mHatMin = {max(minimum_mass, 10.0)!r}",
        *_PROCESS_SETTINGS[process],
    )
    if not hadrons:
        settings = (*settings, "PartonLevel:all = off")
    _configure(pythia, (*_QUIET, *settings))
    _initialise(pythia)
    return pythia


def load_pythia() -> Any:
    """Return the module pythia8mc.

    Returns
    -------
    module
        Python interface of Pythia 8.

    Raises
    ------
    MissingPackageError
        If it is not installed.
    """
    try:
        import pythia8mc
    except ImportError as error:
        msg = (
            "generate: simulation = 'shower' needs the package pythia8mc, which is not "
            "installed; run pip install -e '.[shower]' in the clone"
        )
        raise MissingPackageError(msg) from error
    return pythia8mc


def _configure(pythia: Any, settings: Sequence[str]) -> None:
    for line in settings:
        if not pythia.readString(line):
            msg = (
                f"generate: this version of Pythia 8 does not know the setting {line!r}"
            )
            raise InputError(msg)


def _initialise(pythia: Any) -> None:
    if not pythia.init():
        msg = "generate: Pythia 8 refuses to start with the energy in the options"
        raise InputError(msg)
