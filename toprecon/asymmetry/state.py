"""Names of the rows and columns of the additive state."""

from __future__ import annotations

from toprecon.events import PairingClass

UNIT, TRUE, CLOSEST, CHOSEN, RECO, TRUE_RECO, TRUE_CHOSEN = range(7)
"""Components of u."""

N_CLASSES = len(PairingClass)
OUTSIDE, BACKGROUND, REJECTED = N_CLASSES, N_CLASSES + 1, N_CLASSES + 2
"""Categories beyond the pairing classes of selected signal: signal process outside the
truth phase space, other processes (both selected), and signal that is not selected."""

N_CATEGORIES = N_CLASSES + 3
N_COMPONENTS = 7
