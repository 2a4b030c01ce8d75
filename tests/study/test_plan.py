"""The plan: plain data, checked at the door, the same after a round trip."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from toprecon.errors import InputError, OptionError
from toprecon.study import OBSERVABLES, StudyPlan


def test_default_plan_survives_toml():
    plan = StudyPlan()
    assert StudyPlan.from_toml(plan.to_toml()) == plan


@given(
    chi2=st.floats(0.1, 1e3),
    polarisation=st.floats(-1, 1),
    luminosity=st.floats(0, 1e5),
    on=st.booleans(),
)
def test_any_plan_survives_toml(chi2, polarisation, luminosity, on):
    plan = StudyPlan().with_cut("pairing.chi2", high=chi2, on=on)
    plan = plan.with_settings(
        {
            "beams.electron_polarisation": polarisation,
            "beams.luminosity": luminosity,
            "study.name": "α β = [1]",
        }
    )
    again = StudyPlan.from_toml(plan.to_toml())
    assert again == plan
    assert again.hash == plan.hash


def test_plan_survives_a_file(tmp_path):
    plan = StudyPlan().with_cut("pairing.w_mass", 60, 100)
    path = plan.save(tmp_path / "deep" / "plan.toml")
    assert StudyPlan.load(path) == plan
    assert [p.name for p in path.parent.iterdir()] == ["plan.toml"]


def test_plan_is_hashable_and_frozen():
    plan = StudyPlan()
    assert hash(plan) == hash(StudyPlan())
    with pytest.raises(Exception, match="frozen"):
        plan.cuts = ()


def test_name_and_cuts_do_not_change_the_table():
    plan = StudyPlan()
    named = plan.with_settings({"study.name": "other"})
    cut = plan.with_cut("pairing.chi2", high=5)
    assert named.reconstruct_hash == plan.reconstruct_hash
    assert cut.reconstruct_hash == plan.reconstruct_hash
    assert cut.hash != plan.hash


def test_pairing_settings_change_the_table():
    plan = StudyPlan()
    other = plan.with_settings({"pairing.top_mass": "173"})
    assert other.reconstruct_hash != plan.reconstruct_hash


def test_cut_on_the_same_observable_is_replaced_in_place():
    plan = StudyPlan().with_cut("pairing.chi2", high=5).with_cut("pairing.w_mass", 60)
    plan = plan.with_cut("pairing.chi2", high=9, on=False)
    assert [c.observable for c in plan.cuts] == ["pairing.chi2", "pairing.w_mass"]
    assert plan.cuts[0].high == 9
    assert [c.observable for c in plan.active_cuts] == ["pairing.w_mass"]


def test_code_of_a_plan_makes_the_same_plan():
    plan = StudyPlan().with_settings(
        {"selection.btag_high": 0.7, "pairing.terms.2.on": True, "study.name": "x"}
    )
    plan = plan.with_cut("pairing.chi2", high=5).with_cut("pairing.gap", 1, on=False)
    assert eval(plan.as_code(), {"StudyPlan": StudyPlan}) == plan


def test_infinite_limits_mean_no_limit():
    cut = StudyPlan().with_cut("pairing.chi2", float("-inf"), float("inf")).cuts[0]
    assert cut.low is None
    assert cut.high is None


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            "[paring]\ncap = 5",
            r"plan: paring: unknown option; did you mean 'pairing'\?",
        ),
        ("[pairing]\ncpa = 5", r"pairing.cpa: unknown option; did you mean 'cap'\?"),
        ("[pairing]\ncap = 50", r"pairing.cap: must be <= 8; got 50"),
        ("[truth]\nmatch_angle = nan", r"truth.match_angle: must be a finite number"),
        (
            "[beams]\nluminosity = -1",
            r"beams.luminosity: must be >= 0 fb\^-1; got -1",
        ),
        ("[study]\nchannel = 'dilepton'", r"study.channel: must be one of .*all-had"),
        ("[study]\nversion = 99", r"study.version: must be 1, .*; got 99"),
        ("[study", r"plan: must be TOML"),
        (
            "[[cuts]]\nobservable = 'pairing.chi'",
            r"cuts.0.observable: unknown observable 'pairing.chi'; did you mean 'pair",
        ),
        (
            "[[cuts]]\nobservable = 'pairing.chi2'\nlow = 3\nhigh = 1",
            r"cuts.0: low must not be above high; got low=3.0, high=1.0",
        ),
    ],
)
def test_wrong_plan_is_refused_in_one_sentence(text, message):
    with pytest.raises(OptionError, match=message) as caught:
        StudyPlan.from_toml(text)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("path", "message"),
    [
        ("pairing.cpa", r"pairing.cpa: unknown option; did you mean 'cap'\?"),
        ("paring.cap", r"paring: unknown option; did you mean 'pairing'\?"),
        ("pairing.cap.x", r"pairing.cap.x: unknown option; pairing.cap is a single"),
        ("cuts.0.high", r"cuts.0: must be a position below 0; got '0'"),
    ],
)
def test_wrong_path_of_a_setting_is_refused(path, message):
    with pytest.raises(OptionError, match=message):
        StudyPlan().with_settings({path: "5"})


def test_settings_reach_into_lists():
    plan = StudyPlan().with_settings({"pairing.terms.0.on": "false"})
    assert not plan.pairing.terms[0].on


def test_missing_plan_file_is_one_sentence(tmp_path):
    with pytest.raises(InputError, match=r"none\.toml: a study plan \(TOML\) is requ"):
        StudyPlan.load(tmp_path / "none.toml")


def test_plan_file_that_is_not_text_is_one_sentence(tmp_path):
    path = tmp_path / "plan.toml"
    path.write_bytes(b"\xff\xfe\x00")
    with pytest.raises(InputError, match="not a text file"):
        StudyPlan.load(path)


def test_observables_have_distinct_names_and_full_descriptions():
    names = [o.name for o in OBSERVABLES]
    assert len(set(names)) == len(names)
    for item in OBSERVABLES:
        assert "." in item.name
        assert item.meaning
        assert item.label
        assert item.range[0] < item.range[1]
