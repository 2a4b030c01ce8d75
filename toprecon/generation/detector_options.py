"""Settings of the detector that sees showered events."""

from __future__ import annotations

from toprecon.options import Options, option


class DetectorOptions(Options):
    """Resolutions and thresholds for particles, and how leptons are found.

    The values are common practice for detectors at future e+e- colliders.
    """

    max_abs_cosine: float = option(
        0.995, "particles nearer to the beams are not seen", above=0, high=1
    )
    track_efficiency: float = option(
        0.995, "share of charged particles that are found", low=0, high=1
    )
    track_minimum_pt: float = option(
        0.15, "charged particles below this curl up", unit="GeV", low=0
    )
    track_resolution: float = option(
        2e-5, "resolution of 1/pt, constant term", unit="1/GeV", low=0
    )
    track_scattering: float = option(
        1e-3, "relative resolution of pt from scattering, times sin(theta)", low=0
    )
    photon_threshold: float = option(
        0.2, "photons below this are not seen", unit="GeV", low=0
    )
    photon_stochastic: float = option(
        0.15, "photon energy resolution, term falling with the root of E", low=0
    )
    photon_constant: float = option(0.01, "the same, constant term", low=0)
    photon_angle: float = option(1e-3, "photon direction", unit="rad", low=0)
    neutral_threshold: float = option(
        0.5, "neutral hadrons below this are not seen", unit="GeV", low=0
    )
    neutral_stochastic: float = option(
        0.55, "neutral hadron energy resolution, falling with the root of E", low=0
    )
    neutral_constant: float = option(0.03, "the same, constant term", low=0)
    neutral_angle: float = option(5e-3, "neutral hadron direction", unit="rad", low=0)
    jet_confusion: float = option(
        0.03, "relative energy resolution of jets from mixed-up showers", low=0
    )
    electron_fake: float = option(
        0.002, "share of charged hadrons taken for electrons", low=0, high=1
    )
    muon_fake: float = option(
        0.004, "share of charged hadrons taken for muons", low=0, high=1
    )
    lepton_minimum_energy: float = option(
        10.0, "isolated leptons have at least this energy", unit="GeV", low=0
    )
    isolation_scale: float = option(
        10.0, "opening of the cone times the energy of the lepton", unit="GeV", low=0
    )
    isolation_narrowest: float = option(0.05, "narrowest cone", unit="rad", low=0)
    isolation_widest: float = option(0.2, "widest cone", unit="rad", low=0)
    isolation_limit: float = option(
        0.15, "energy in the cone over that of the lepton is below this", low=0
    )
    dressing_angle: float = option(
        0.03, "photons this near are added to an isolated lepton", unit="rad", low=0
    )
    track_charge_power: float = option(
        0.5, "power of the energy share in the track charge of a jet", low=0, high=2
    )
