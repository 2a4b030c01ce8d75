"""What judges the hypotheses of some events: terms, joint score, penalties of jets."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator

import awkward as ak
import numpy as np
from numpy.typing import NDArray

from toprecon.errors import OptionError
from toprecon.events import Channel
from toprecon.pairing.calibration import Calibration
from toprecon.pairing.engine import Group
from toprecon.pairing.joint import JointScore
from toprecon.pairing.likelihoods import charges_of
from toprecon.pairing.objects import Objects, leading_lepton
from toprecon.pairing.options import PairingOptions, ScoreKind, TagUse

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

NEAR = 0.05  # relative distance in energy up to which a calibration is used


@dataclasses.dataclass(frozen=True)
class Judge:
    """Options at work on events.

    Parameters
    ----------
    options : PairingOptions
        Score, b scores, charges.
    channel : Channel
        Decay channel.
    charge : array, shape (2, J) or None
        Vertex and track charge of all jets where they are used.
    """

    options: PairingOptions
    channel: Channel
    charge: FloatArray | None

    @classmethod
    def of(cls, events: ak.Array, options: PairingOptions, channel: Channel) -> Judge:
        """Return the judge of some events."""
        used = options.charges or channel is Channel.ALL_HADRONIC
        charge = np.stack(charges_of(events)) if used else None
        return cls(options, channel, charge)

    @property
    def needs_calibration(self) -> bool:
        """Whether a calibration is used."""
        o = self.options
        return (
            o.score is not ScoreKind.PLAIN
            or o.tags is TagUse.LIKELIHOOD
            or (o.charges and self.channel is Channel.LEPTON_JETS)
        )

    def split(
        self, rows: IntArray, sqrt_s: FloatArray
    ) -> Iterator[tuple[NDArray[np.bool_], Calibration | None]]:
        """Yield masks of rows with the calibration nearest in energy.

        Parameters
        ----------
        rows : array of int, shape (G,)
            Events.
        sqrt_s : array, shape (E,)
            Collision energies of all events [GeV].

        Yields
        ------
        mask : array of bool, shape (G,)
            Rows of one calibration.
        calibration : Calibration or None
            None if none is used, or none is near and none is needed.

        Raises
        ------
        OptionError
            If one is needed and none is near.
        """
        known = [c for c in self.options.calibrations if c.channel is self.channel]
        energy = sqrt_s[rows]
        if not known:
            if self.needs_calibration and len(rows):
                raise OptionError(self._missing("another channel", energy[0]))
            yield np.ones(len(rows), dtype=bool), None
            return
        distance = np.abs(np.array([c.sqrt_s for c in known])[:, None] / energy - 1.0)
        nearest = np.where(distance.min(axis=0) <= NEAR, distance.argmin(axis=0), -1)
        for index in np.unique(nearest):
            mask = nearest == index
            if index < 0 and self.needs_calibration:
                have = ", ".join(f"{c.sqrt_s:g}" for c in known)
                raise OptionError(self._missing(f"{have} GeV", energy[mask][0]))
            yield mask, None if index < 0 else known[index]

    def _missing(self, have: str, energy: float) -> str:
        return (
            f"pairing.calibrations: one for {self.channel.value} within {NEAR:.0%} of "
            f"{energy:g} GeV is required, but those there are for {have}; make one with "
            "toprecon.pairing.calibrate from such events"
        )

    def joint(
        self, calibration: Calibration | None, sqrt_s: FloatArray
    ) -> JointScore | None:
        """Return the joint score, if it is used."""
        if self.options.score is ScoreKind.PLAIN or calibration is None:
            return None
        return JointScore(calibration, self.options.score, sqrt_s)

    def group(
        self,
        objects: Objects,
        rows: IntArray,
        positions: IntArray,
        calibration: Calibration | None,
    ) -> Group:
        """Return the engine's arrays of some events, with the penalties of jets."""
        btag = objects.btag[positions].T
        b = leptonic = w = None
        if self.options.tags is TagUse.MASK:
            candidate = b_candidates(btag)
            b = np.where(candidate, 0.0, np.inf)
            w = np.where(candidate, np.inf, 0.0)
        elif self.options.tags is TagUse.LIKELIHOOD and calibration is not None:
            b = -2.0 * calibration.tag.of(btag)
        if self.options.charges and self.channel is Channel.LEPTON_JETS:
            turned = self.jet_charges(calibration)[positions].T
            turned = turned * objects.lepton_charge[rows]
            leptonic = turned if b is None else b + turned
            b = -turned if b is None else b - turned
        return Group(
            jets=np.ascontiguousarray(objects.jets[:, positions.T]),
            lepton=objects.lepton[:, rows],
            neutrino=objects.neutrino[:, rows],
            b_penalty=b,
            w_penalty=w,
            leptonic_b_penalty=leptonic,
        )

    def single_jets(
        self,
        events: ak.Array,
        assignment: NDArray[np.int8],
        jets: IntArray,
        rows: IntArray,
        calibration: Calibration | None,
    ) -> dict[str, FloatArray]:
        """Return the contributions of b scores and charges to some assignments."""
        result = {}
        b, bbar = jets[:, 0], jets[:, 3]
        if self.options.tags is TagUse.LIKELIHOOD and calibration is not None:
            btag = ak.to_numpy(ak.flatten(events.jets.btag)).astype(np.float64)
            result["b_scores"] = -2.0 * (
                calibration.tag.of(btag[b]) + calibration.tag.of(btag[bbar])
            )
        if self.options.charges and self.channel is Channel.LEPTON_JETS:
            ratio = self.jet_charges(calibration)
            top_is_hadronic = assignment[:, 1] >= 0
            difference = np.where(
                top_is_hadronic, ratio[bbar] - ratio[b], ratio[b] - ratio[bbar]
            )
            result["charges"] = leading_lepton(events)[1][rows] * difference
        return result

    def jet_charges(self, calibration: Calibration | None) -> FloatArray:
        """Return ln(anti-b/b) of all jets, shape (J,); plain sums if not calibrated."""
        if self.charge is None:
            return np.zeros(0)
        if calibration is None:
            plain: FloatArray = np.nan_to_num(self.charge).sum(axis=0)
            return plain
        return calibration.charge.log_ratio(*self.charge)


def b_candidates(btag: FloatArray) -> NDArray[np.bool_]:
    """Return which jets have the two highest scores (first of equals), shape (n, E)."""
    order = np.argsort(-btag, axis=0, kind="stable")
    result = np.zeros(btag.shape, dtype=bool)
    np.put_along_axis(result, order[:2], values=True, axis=0)
    return result
