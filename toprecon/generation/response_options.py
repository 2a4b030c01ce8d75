"""Settings of the response of the detector."""

from __future__ import annotations

from toprecon.options import Options, option


class ResponseOptions(Options):
    """Resolutions, tag rates and charge purities of a generic e+e- detector.

    The values are common practice for detectors at future e+e- colliders.
    """

    jet_energy_stochastic: float = option(
        0.3, "jet energy resolution, term falling with the root of E [GeV]", low=0
    )
    jet_energy_constant: float = option(
        0.03, "jet energy resolution, constant term", low=0, high=0.5
    )
    jet_angle: float = option(
        0.015, "jet direction, resolution in each of two angles", unit="rad", low=0
    )
    btag_efficiency_b: float = option(
        0.80, "share of b jets with a score above 0.5", above=0, high=0.999
    )
    btag_efficiency_c: float = option(
        0.10, "share of c jets with a score above 0.5", above=0, high=0.999
    )
    btag_efficiency_light: float = option(
        0.01, "share of light jets with a score above 0.5", above=0, high=0.999
    )
    track_charge_purity: float = option(
        0.67, "share of quark jets whose track charge has the right sign", low=0.5
    )
    vertex_charge_purity: float = option(
        0.72, "share of b jets whose vertex charge has the right sign", low=0.5
    )
    lepton_efficiency: float = option(
        0.97, "share of true isolated leptons that are found", low=0, high=1
    )
    lepton_resolution: float = option(
        0.003, "relative energy resolution of leptons", low=0, high=0.5
    )
    lepton_charge_flip: float = option(
        0.001, "share of leptons with the wrong charge", low=0, high=0.5
    )
