"""What beam polarisations do to the two pure helicity configurations."""

from __future__ import annotations

from toprecon.errors import OptionError


def beam_fractions(
    electron_polarisation: float, positron_polarisation: float
) -> tuple[float, float]:
    """Return the weights of sigma_LR and sigma_RL for polarised beams.

    Parameters
    ----------
    electron_polarisation, positron_polarisation : float
        In [-1, 1]; > 0 is right-handed.

    Returns
    -------
    tuple of float
        (1 - P-)(1 + P+)/4 for e-L e+R and (1 + P-)(1 - P+)/4 for e-R e+L. Beams of
        equal helicity contribute nothing to the exchange of vector bosons.

    Raises
    ------
    OptionError
        If a polarisation is outside [-1, 1].

    References
    ----------
    G. Moortgat-Pick et al., hep-ph/0507011, section 1.2.

    Examples
    --------
    >>> beam_fractions(0, 0)
    (0.25, 0.25)
    """
    for name, value in (
        ("electron_polarisation", electron_polarisation),
        ("positron_polarisation", positron_polarisation),
    ):
        if not -1 <= value <= 1:
            msg = f"{name}: must be between -1 and 1; got {value!r}"
            raise OptionError(msg)
    left = (1 - electron_polarisation) * (1 + positron_polarisation) / 4
    right = (1 + electron_polarisation) * (1 - positron_polarisation) / 4
    return left, right
