"""Inputs and form factors."""

from __future__ import annotations

import pytest

from toprecon.treelevel import ElectroweakInputs, FormFactors


def test_absent_form_factors_have_their_tree_level_values():
    inputs = ElectroweakInputs(sin2_theta=0.25)
    factors = FormFactors.standard_model(inputs)
    assert factors.f1v_photon == pytest.approx(2 / 3)
    assert factors.f1a_photon == 0.0
    # sin cos = sqrt(3)/4: (1 - 2/3)/sqrt(3) and -1/sqrt(3)
    assert factors.f1v_z == pytest.approx(1 / 3 / 3**0.5)
    assert factors.f1a_z == pytest.approx(-1 / 3**0.5)
    assert FormFactors(f1v_z=0.5).resolved(inputs).f1v_z == 0.5


def test_shifts_are_added():
    start = FormFactors.standard_model()
    moved = FormFactors().shifted(f1a_z=0.1, f2v_z=0.02)
    assert moved.f1a_z == pytest.approx(start.f1a_z + 0.1)
    assert moved.f2v_z == 0.02
    assert moved.f1v_photon == start.f1v_photon


def test_unknown_form_factor_is_refused():
    with pytest.raises(ValueError, match=r"f1v_zz: unknown option; did you mean"):
        FormFactors().shifted(f1v_zz=0.1)
