from __future__ import annotations

import pytest

from toprecon.boosted import BoostedOptions, FeatureTable, TagOptions
from toprecon.errors import OptionError


def test_options_survive_plain_data():
    table = FeatureTable(name="tau_32", edges=(0.5,), log_ratio=(1.0, -1.0))
    options = BoostedOptions(
        algorithm="inclusive",
        tag={"method": "likelihood", "likelihood": {"features": (table,)}},
    )
    assert BoostedOptions(**options.to_mapping()) == options
    assert hash(BoostedOptions(**options.to_mapping())) == hash(options)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"algoritm": "durham"}, "algoritm: unknown option; did you mean 'algorithm'"),
        ({"radius": -1.0}, "radius: must be > 0 rad; got -1"),
        (
            {"tag": {"mass_high": 100.0}},
            "mass_high must be > mass_low = 140 GeV; got 1",
        ),
        ({"tag": {"method": "likelihood"}}, "requires tables in likelihood.features"),
        ({"substructure": {"z_cut": 0.6}}, "z_cut: must be <= 0.5; got 0.6"),
    ],
)
def test_wrong_settings_are_refused_in_one_sentence(settings, message):
    with pytest.raises(OptionError, match=message):
        BoostedOptions(**settings)


def test_wrong_tables_are_refused():
    with pytest.raises(OptionError, match="edges must increase"):
        FeatureTable(name="c2", edges=(1.0, 1.0), log_ratio=(0, 0, 0))
    with pytest.raises(OptionError, match="one log ratio more than edges"):
        FeatureTable(name="c2", edges=(1.0,), log_ratio=(0.0,))
    with pytest.raises(OptionError, match="w_mass_high must be > w_mass_low"):
        TagOptions(w_mass_low=120.0)
