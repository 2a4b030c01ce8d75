"""Read the event files in TOPRECON_EVENT_DATA without the package's own reader."""

from __future__ import annotations

import numpy as np
import uproot

from toprecon.events import Helicity, Sample, make_events, momenta, record_of
from toprecon.kinematics import from_pt_eta_phi_mass

NAMES = {
    "top": "t",
    "antitop": "tb",
    "w_plus": "wp",
    "w_minus": "wm",
    "b": "b",
    "bbar": "bb",
    "w_plus_up": "wp_up",
    "w_plus_down": "wp_dn",
    "w_minus_up": "wm_up",
    "w_minus_down": "wm_dn",
}


def load(folder, name, stop=None):
    """Return Events and the generator's labels of the jets: (events, labels)."""
    with uproot.open(folder / "showered" / f"{name}.root") as file:
        a = file["events"].arrays(entry_stop=stop)

    def flat(prefix, parts):
        return [np.concatenate([*map(np.asarray, a[prefix + p])]) for p in parts]

    n_jets, n_leptons = np.asarray(a.njt), np.asarray(a.nil)
    btag, q_vertex, q_track, source, source_angle = flat(
        "jt_", ("bdisc", "qvtx", "qtrk", "src", "srcang")
    )
    jets = momenta(
        from_pt_eta_phi_mass(*flat("jt_", ("pt", "eta", "phi", "m"))),
        n_jets,
        btag=btag.astype(float),
        vertex_charge=q_vertex.astype(float),
        track_charge=q_track.astype(float),
    )
    charge, pdg = flat("il_", ("q", "pdg"))
    leptons = momenta(
        from_pt_eta_phi_mass(*flat("il_", ("pt", "eta", "phi", "m"))),
        n_leptons,
        charge=charge.astype(float),
        pdg=pdg.astype(int),
        isolation=np.zeros(len(pdg)),
    )
    truth = {}
    for ours, theirs in NAMES.items():
        p = np.stack([np.asarray(a[f"gen_{theirs}_{c}"], float) for c in "exyz"])
        p[:, (p == 0).all(axis=0)] = np.nan
        extra = {}
        if f"gen_{theirs}_pdg" in a.fields:
            extra["pdg"] = np.asarray(a[f"gen_{theirs}_pdg"])
        truth[ours] = momenta(p, **extra)
    truth["sqrt_s_prime"] = np.asarray(a.ecm_eff, float)
    n = len(a)
    helicity = np.asarray(a.pol_em).astype(np.int8)
    sample = Sample(
        name,
        process="WW" if name.startswith("ww") else "ttbar",
        helicity=Helicity(int(helicity[0])),
        sqrt_s=float(a.ecm_nom[0]),
    )
    events = make_events(
        {
            "jets": jets,
            "leptons": leptons,
            "missing": momenta(
                np.stack([np.asarray(a[f"pmiss_{c}"], float) for c in "exyz"])
            ),
            "truth": record_of(truth),
            "weight": np.asarray(a.evt_w, float),
            "sample": np.zeros(n, np.int16),
            "helicity": helicity,
            "sqrt_s": np.asarray(a.ecm_nom, float),
            "id": np.asarray(a.evt_no).astype(np.uint64),
        },
        [sample],
    )
    labels = {"source": source, "angle": source_angle, "n_jets": n_jets}
    return events, labels
