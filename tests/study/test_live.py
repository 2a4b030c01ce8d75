"""The live study: newest plan wins, cached results, quick moves, errors, progress."""

from __future__ import annotations

import threading

import numpy as np
import pytest

import toprecon
from toprecon.errors import OptionError, StudyError
from toprecon.pairing import PairingOptions
from toprecon.study import (
    Binning,
    LiveStudy,
    StudyPlan,
    apply_cuts,
    finish,
    live_source,
    reconstruct,
    summarise,
)

PLAN = StudyPlan().with_cut("pairing.chi2", high=40)


@pytest.fixture(scope="module")
def events():
    return toprecon.generate(4000, seed=11)


@pytest.fixture(scope="module")
def table(events):
    return reconstruct(events, PLAN)


@pytest.fixture
def live(table):
    study = LiveStudy(table, PLAN)
    yield study
    study.close()


@pytest.fixture
def still(table):
    study = LiveStudy(table, PLAN, synchronous=True)
    yield study
    study.close()


def test_result_is_that_of_run_study(still, table):
    assert str(still.result) == str(toprecon.run_study(table, PLAN))


def test_synchronous_change_has_its_result_at_once(still, table):
    still.set_cut("pairing.chi2", high=5)
    assert still.is_settled
    assert still.shown_plan == still.plan
    direct = toprecon.run_study(table, PLAN.with_cut("pairing.chi2", high=5))
    assert still.result.asymmetry.reconstructed == direct.asymmetry.reconstructed


def test_newest_plan_wins_and_settles(live, table):
    for high in np.linspace(39, 6, 60):
        live.set_cut("pairing.chi2", high=float(high))
    result = live.wait()
    assert result.plan.cuts[0].high == 6
    assert live.is_settled
    direct = toprecon.run_study(table, live.plan)
    assert result.migration.equals(direct.migration)


def test_old_plan_is_answered_from_the_cache(still):
    first = still.result
    still.set_cut("pairing.chi2", high=5)
    still.set_cut("pairing.chi2", high=40)
    assert still.result is first


def test_a_cut_does_not_reconstruct_but_a_pairing_option_does(events, monkeypatch):
    calls = []

    def counted(*args):
        calls.append(args)
        return reconstruct(*args)

    monkeypatch.setattr(live_source, "reconstruct", counted)
    live = LiveStudy(events, PLAN, synchronous=True)
    assert len(calls) == 1
    live.set_cut("pairing.chi2", high=5)
    assert len(calls) == 1
    live.configure(pairing=PairingOptions(tags="ignore"))
    assert len(calls) == 2
    live.configure(pairing=PLAN.pairing)
    assert len(calls) == 2
    live.close()


def test_table_cannot_follow_a_pairing_option(still):
    still.configure(pairing=PairingOptions(tags="ignore"))
    assert isinstance(still.error, StudyError)
    assert "the sections pairing differ" in str(still.error)
    still.configure(pairing=PLAN.pairing)
    assert still.error is None


def test_wrong_setting_raises_and_changes_nothing(still):
    before = still.plan
    with pytest.raises(OptionError, match="unknown observable"):
        still.set_cut("pairing.chi", high=3)
    assert still.plan == before


def test_error_is_raised_by_wait_and_forgotten_after_a_good_plan(live):
    live.set_cut("pairing.chi2", high=0)
    with pytest.raises(StudyError, match="at least one selected event is required"):
        live.wait()
    live.set_cut("pairing.chi2", high=20)
    assert live.wait().plan.cuts[0].high == 20


def test_first_answer_to_a_move_comes_before_the_study_settles(live):
    live.wait()
    seen = []
    live.on_change(lambda s: seen.append((s.shown_plan.cuts[0].high, s.is_settled)))
    live.set_cut("pairing.chi2", high=39)
    live.wait()
    assert seen == [(39, False), (39, True)]


def test_listener_can_leave(still):
    seen = []
    remove = still.on_change(seen.append)
    still.set_cut("pairing.chi2", high=30)
    remove()
    still.set_cut("pairing.chi2", high=20)
    assert len(seen) == 1


def test_listener_must_not_wait(live):
    live.wait()
    caught = []

    def listener(study):
        with pytest.raises(StudyError, match="a listener must not wait") as info:
            study.wait()
        caught.append(info.value)

    live.on_change(listener)
    live.set_cut("pairing.chi2", high=30)
    live.wait()
    assert caught


def test_error_of_a_listener_reaches_whoever_waits_and_the_worker_lives_on(live):
    live.wait()

    def listener(study):
        raise ZeroDivisionError

    remove = live.on_change(listener)
    live.set_cut("pairing.chi2", high=30)
    with pytest.raises(ZeroDivisionError):
        live.wait()
    remove()
    live.set_cut("pairing.chi2", high=20)
    assert live.wait().plan.cuts[0].high == 20


def test_listeners_never_overlap(live):
    live.wait()
    inside, worst = [], []

    def listener(study):
        inside.append(1)
        worst.append(len(inside))
        threading.Event().wait(0.002)
        inside.pop()

    live.on_change(listener)

    def editor(start):
        for step in range(20):
            live.set_cut("pairing.chi2", high=start + step)
            with live.lock:
                listener(live)

    threads = [threading.Thread(target=editor, args=(s,)) for s in (5, 50)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    live.wait()
    assert max(worst) == 1


def test_stop_gives_up_between_chunks_and_resume_goes_on(events, monkeypatch):
    monkeypatch.setattr(live_source, "CHUNK", 1000)
    stopped = threading.Event()

    def slow(part, plan):
        live.stop()
        stopped.set()
        return reconstruct(part, plan)

    monkeypatch.setattr(live_source, "reconstruct", slow)
    live = None
    start = threading.Event()
    original = LiveStudy._work

    def delayed(self):
        start.wait()
        original(self)

    monkeypatch.setattr(LiveStudy, "_work", delayed)
    live = LiveStudy(events, PLAN)
    start.set()
    with pytest.raises(StudyError, match="stopped before the end"):
        live.wait()
    assert stopped.is_set()
    assert not live.progress.is_running
    monkeypatch.setattr(live_source, "reconstruct", reconstruct)
    live.resume()
    assert live.wait().cut_flow.counts[0] == len(events)
    assert live.progress.done == live.progress.total == len(events)
    assert str(live.progress).startswith("reconstructing")
    live.close()


def test_files_and_saved_tables_are_opened(table, tmp_path):
    path = table.save(tmp_path / "table.parquet")
    live = LiveStudy(str(path), PLAN, synchronous=True)
    assert str(live.result) == str(toprecon.run_study(table, PLAN))
    live.close()


def test_distribution_ignores_its_own_cut_and_obeys_the_others(still, table):
    still.set_cut("pairing.w_mass", 70, 90)
    binning = Binning.regular(50, 0, 500)
    parts = still.distribution("pairing.chi2", binning)
    plan = still.plan.replace(cuts=still.plan.cuts[1:])
    keep = apply_cuts(table, plan).selected
    expected, _ = np.histogram(table["pairing.chi2"][keep].astype(float), binning.array)
    assert np.array_equal(sum(parts.values()), expected)  # unit weights
    correct = keep & (table["pairing_class"] == 3) & table["is_signal"]
    counted, _ = np.histogram(
        table["pairing.chi2"][correct].astype(float), binning.array
    )
    assert np.array_equal(parts["correct"], counted)


def test_selected_rows_are_those_of_the_cuts(still, table):
    still.set_cut("pairing.w_mass", 70, 90)
    assert np.array_equal(still.selected(), apply_cuts(table, still.plan).selected)


def test_code_gives_the_same_plan(still):
    still.set_cut("pairing.w_mass", 70, 90)
    scope = {}
    exec(still.code().rsplit("\n", 1)[0], scope)
    assert scope["plan"] == still.plan


def test_wait_gives_up_in_one_sentence(live):
    live.wait()
    with live.lock:  # the worker cannot show anything meanwhile
        live.set_cut("pairing.chi2", high=30)
        with pytest.raises(StudyError, match="no result within 0"):
            live.wait(0.05)


def test_closed_study_has_no_thread(table):
    live = LiveStudy(table, PLAN)
    live.wait()
    live.close()
    assert not any(t.name == "toprecon-live" for t in threading.enumerate())


def test_one_event_is_the_row_of_the_table(events, tmp_path, monkeypatch):
    monkeypatch.setattr(live_source, "CHUNK", 1000)
    part = events[:2500]
    path = toprecon.io.write_events(part, tmp_path / "events.root")
    memory = LiveStudy(part, PLAN, synchronous=True)
    files = LiveStudy(path, PLAN, synchronous=True)
    for row in (0, 999, 1000, 2499, 3):
        a, b = memory.view_event(row), files.view_event(row)
        assert a.facts == b.facts
        assert np.allclose(a.objects[0].momentum, b.objects[0].momentum)
        cosine = files.table["cos_theta_reco"][row]
        if np.isfinite(cosine):
            text = f"cos θ reconstructed {cosine:+.3f}".replace("-", "−")
            assert text in b.facts
    with pytest.raises(StudyError, match="row: must be from 0 to 2499; got 2500"):
        files.view_event(2500)
    memory.close()
    files.close()


def test_one_event_needs_events(still):
    with pytest.raises(StudyError, match="the study was given a saved table"):
        still.view_event(3)


def test_snapshot_holds_what_is_shown(still):
    table, plan = still.snapshot()
    still.set_cut("pairing.chi2", high=5)
    assert plan == PLAN
    assert table is still.table


def test_finish_of_full_sums_is_what_a_settled_study_shows(live, table):
    live.set_cut("pairing.chi2", high=12.5)
    shown = live.wait()
    assert shown.by_class == finish(summarise(table, live.plan), live.plan).by_class


@pytest.mark.parametrize("synchronous", [False, True])
def test_long_work_has_its_turn_and_gives_its_outcome(table, synchronous):
    live = LiveStudy(table, PLAN, synchronous=synchronous)
    live.wait()
    told, seen, failures = [], [], []
    live.on_change(lambda one: told.append(str(one.progress)))

    def work(report):
        report(1, 3)
        return threading.current_thread()

    live.run("counting", work, seen.append, failed=failures.append)
    live.wait()
    assert len(seen) == 1
    assert not failures
    assert (seen[0] is threading.current_thread()) == synchronous
    if not synchronous:
        assert "counting: 1 of 3 chunks" in told
    assert not live.progress.is_running
    live.close()


@pytest.mark.parametrize("synchronous", [False, True])
def test_outcome_of_long_work_may_change_the_plan(table, synchronous):
    live = LiveStudy(table, PLAN, synchronous=synchronous)
    live.wait()
    plan = PLAN.with_cut("pairing.chi2", high=20)
    live.run("choosing", lambda _: plan, live.set_plan, failed=print)
    live.wait()
    assert live.shown_plan == plan
    live.close()


def test_failed_and_stopped_work_is_reported_and_the_study_goes_on(table):
    live = LiveStudy(table, PLAN)
    live.wait()
    failures, reason = [], "of no use"

    def wrong(_):
        raise ValueError(reason)

    def endless(report):
        live.stop()
        report(1, 2)

    live.run("trying", wrong, print, failed=failures.append)
    live.run("waiting", endless, print, failed=failures.append)
    live.wait()
    assert [str(error) for error in failures] == [
        "of no use",
        "waiting: stopped before the end",
    ]
    live.set_cut("pairing.chi2", high=10)
    assert live.wait().plan.active_cuts
    live.close()
