from __future__ import annotations

import pytest

from toprecon.errors import OptionError
from toprecon.events import Observable, find_observable

CHI2 = Observable("pairing.chi2", "", "chi-square", (0, 100), "chi-square")
MASS = Observable("pairing.w_mass", "GeV", "mass", (60, 100), "W mass")


def test_the_label_of_an_axis_has_its_unit():
    assert CHI2.axis_label == "chi-square"
    assert MASS.axis_label == "W mass [GeV]"


def test_an_observable_is_found_by_name():
    assert find_observable("pairing.w_mass", [CHI2, MASS]) is MASS


def test_an_unknown_observable_is_refused_with_the_nearest_name():
    with pytest.raises(
        OptionError,
        match=r"cuts.0: unknown observable 'pairing.chi'; did you mean 'pairing.chi2'",
    ):
        find_observable("pairing.chi", [CHI2, MASS], where="cuts.0")
    with pytest.raises(OptionError, match=r"; known: pairing.chi2, pairing.w_mass"):
        find_observable("zzz", [CHI2, MASS])
