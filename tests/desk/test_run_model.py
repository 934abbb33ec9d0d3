"""What a run has come to, from its messages."""

from __future__ import annotations

from typing import Any

from rig.desk.model.run_model import RunModel

HZ = 1_000_000


def event(seconds: float, kind: str, **data: Any) -> dict[str, Any]:
    return {"event": {"tick": round(seconds * HZ), "kind": kind, **data}}


def told(model: RunModel, *lines: dict[str, Any]) -> set[str]:
    changed: set[str] = set()
    for line in lines:
        changed |= model.take(line)
    return changed


def standing(seconds: float, **more: Any) -> dict[str, Any]:
    return {
        "standing": {
            "time_s": seconds,
            "tick": round(seconds * HZ) + 5000,
            "standing": {"prompt": ""},
            "flap_hz": 25.0,
            **more,
        }
    }


def begun() -> RunModel:
    model = RunModel()
    model.start()
    told(
        model,
        {"ready": {"ring": "/r", "bench": "boom", "channels": ["body"], "tick_hz": HZ}},
        event(0.02, "run"),
        event(3.0, "level", level=0, direction="rising", drive_v=7.0, role="level"),
    )
    return model


def tap_verdict(tap: int, **more: Any) -> dict[str, Any]:
    usual = {"tick": 9 * HZ, "level": 0, "returned": True, "accepted": True, "reason": "came back"}
    decay = {"decay_per_s": 0.8, "decay_std_per_s": 0.01}
    return {"verdict": {"kind": "tap", "tap": tap, **usual, **decay, **more}}


def test_the_phases_of_a_run() -> None:
    model = RunModel()
    assert model.word == "no run" and not model.may_be_driven
    model.start()
    seen = [model.phase]
    for line in (
        {"ready": {}},
        event(0.0, "run"),
        event(5.0, "trip", cause="load", sentence="Load exceeded."),
        event(5.0, "halt", how="ramp", cause="load"),
        event(6.0, "turning", flap_hz=3.0),
        event(9.0, "standstill", coast_s=3.0),
        event(9.0, "waiting"),
        event(20.0, "rearmed", by="me"),
        event(30.0, "halt", how="ramp", cause="end of the protocol"),
        event(40.0, "finished", exit_code=0, reason="done"),
    ):
        model.take(line)
        if model.phase != seen[-1]:
            seen.append(model.phase)
    assert seen == [
        "starting", "ready", "running", "stopping", "turning", "waiting", "running", "stopping", "finished",
    ]  # fmt: skip
    assert model.exit_code == 0 and model.trips == []
    told(model, {"done": {"exit_code": 0, "reason": "done", "session": "/s.h5"}})
    assert model.session == "/s.h5"


def test_a_run_that_could_not_start_is_told_from_one_that_broke_off() -> None:
    model = RunModel()
    model.start()
    model.take({"failed": {"exit_code": 4, "reason": "there is no such port"}})
    assert model.phase == "failed" and model.reason == "there is no such port"
    broken = begun()
    broken.take({"failed": {"exit_code": 4, "reason": "the bench process has died"}})
    assert broken.phase == "finished" and broken.exit_code == 4


def test_levels_taps_and_their_outcomes() -> None:
    model = begun()
    for number, by in ((0, "tapper"), (1, "tapper"), (2, "hand"), (3, "tapper"), (4, "tapper")):
        told(model, event(5.0 + number, "tap", tap=number, level=0, impulse_n_m_s=1e-4, by=by))
    told(
        model,
        tap_verdict(0),
        tap_verdict(1, accepted=False, reason="struck 2 times"),
        tap_verdict(2, accepted=False, returned=False, reason="lost to the upper stop"),
        tap_verdict(3, accepted=False, reason="no tap was seen at its time"),
    )
    assert [mark.outcome for mark in model.rungs[0].taps] == [
        "accepted",
        "double",
        "lost",
        "left_out",
        "observed",
    ]
    assert model.sounds == ["accepted", "double", "lost", "double"]
    told(model, event(11.0, "tap_excluded", tap=0, reason="touched"))
    assert model.tap(0).outcome == "excluded"  # type: ignore[union-attr]
    told(model, tap_verdict(0, accepted=False, reason="excluded by the operator: touched"))
    assert model.tap(0).outcome == "excluded"  # type: ignore[union-attr]
    half = {"kind": "level", "tick": 12 * HZ, "level": 0, "state": "held", "regime": "stable"}
    changed = told(
        model, {"verdict": {**half, "decay_half_width_per_s": 0.02}}, event(12.0, "level_end", level=0)
    )
    rung = model.rungs[0]
    assert (rung.state, rung.regime, rung.half_width_per_s, rung.ended) == ("held", "stable", 0.02, True)
    assert "levels" in changed and model.on_hand is None


def left_out(*lines: dict[str, Any]) -> RunModel:
    """A run whose first tap is taken back, and what comes then."""
    model = begun()
    told(model, event(5.0, "tap", tap=0, level=0, impulse_n_m_s=1e-4, by="tapper"))
    told(model, event(6.0, "tap_excluded", tap=0, reason="rejected by the operator"), *lines)
    return model


def test_why_a_tap_was_left_out_stands_against_a_verdict_that_comes_late() -> None:
    """The analysis judges the tap as it was known at its end; what was said since is newer."""
    late = tap_verdict(0, accepted=False, reason="excluded by the operator: rejected by the operator")
    model = left_out(event(6.5, "tap_reason", tap=0, reason="too hard"), late)
    mark = model.tap(0)
    assert mark is not None and (mark.outcome, mark.reason) == ("excluded", "too hard")
    assert mark.decay_per_s is not None and model.unexplained is None


def test_a_reason_is_asked_for_until_it_is_late() -> None:
    again = event(6.1, "tap", tap=1, level=0, impulse_n_m_s=1e-4, by="tapper")
    assert begun().unexplained is None
    assert left_out().unexplained == left_out(tap_verdict(0, accepted=False), again).unexplained == 0
    assert left_out(again, tap_verdict(1)).unexplained is None
    assert left_out(event(7.0, "level_end", level=0)).unexplained == 0
    more = event(8.0, "level", level=1, direction="rising", drive_v=5.0)
    assert left_out(event(7.0, "level_end", level=0), more).unexplained is None
    second = event(7.0, "tap_excluded", tap=1, reason="rejected by the operator")
    both = left_out(again, second, event(7.5, "tap_reason", tap=0, reason="too hard"))
    assert both.unexplained == 1  # a word for the tap before is no word for this one


def test_a_reason_alone_leaves_no_tap_out() -> None:
    model = begun()
    told(model, event(5.0, "tap", tap=0, level=0, impulse_n_m_s=1e-4, by="tapper"))
    told(model, tap_verdict(0), event(6.0, "tap_reason", tap=0, reason="too hard"))
    told(model, event(6.0, "tap_reason", tap=9, reason="too hard"))
    assert (model.tap(0).outcome, model.tap(0).reason) == ("accepted", "came back")  # type: ignore[union-attr]


def test_what_was_refused_is_among_the_notes() -> None:
    model = begun()
    told(model, event(6.0, "refused", reason="tap 7 has not been left out"))
    assert "standing" in told(model, {"refused": "a reason must have words"})
    assert [words for _, words in model.notes] == ["tap 7 has not been left out", "a reason must have words"]


def test_conditions_belong_to_the_level_at_hand() -> None:
    model = begun()
    condition = {"kind": "condition", "mean_angle_rad": 0.1, "state": "held", "settled": True}
    told(model, {"verdict": {**condition, "tick": 2 * HZ, "flap_hz": 20.0}})
    assert model.rungs[0].flap_hz is None  # from before the level
    told(model, {"verdict": {**condition, "tick": 4 * HZ, "flap_hz": 25.0}})
    assert model.rungs[0].flap_hz == 25.0 and model.body == "held"


def test_prompts_come_and_go() -> None:
    model = begun()
    told(model, {"prompt": "fit the guard"}, event(4.0, "prompt", text="fit the guard"))
    assert model.prompt == "fit the guard" and model.sounds == []
    told(model, event(6.0, "acknowledged", text="fit the guard", waited_s=2.0))
    assert model.prompt == ""
    told(model, {"prompt": "tap now, upward, gently, with the rod"})
    assert model.sounds == ["tap"]
    told(model, event(8.0, "tap_end", tap=0, level=0, writes=0))
    assert model.prompt == ""
    told(model, {"prompt": "fit the guard"}, event(9.0, "prompt", text="fit the guard"), standing(9.5))
    assert model.prompt == ""  # it is not waited for any more


def test_times_count_from_the_first_row() -> None:
    model = begun()
    told(model, standing(4.0))
    assert model.origin_tick == 5000
    assert model.seconds(3 * HZ + 5000) == 3.0


def test_losses_notices_and_pictures_are_kept() -> None:
    model = begun()
    told(
        model,
        event(4.0, "loss", rows=20, frames=1, overruns=0),
        event(4.1, "notice", notice="latch", cause="guard"),
        event(4.1, "notice", notice="index", channel="crank"),
        event(4.15, "notice", notice="sampler", text="strain has failed"),
        event(4.2, "mark", text="changed the wing"),
        {"picture": {"tap": {"tap": {"tap": 3}, "time_s": [0.0]}}},
        {"picture": {"map": {"levels": []}}},
        {"picture": {"theory": {"averaged_fold_hz": 26.0, "curve": []}}},
    )
    assert (model.lost_rows, model.lost_frames) == (20, 1)
    assert [words for _, words in model.notes] == [
        "the board switched off by itself: guard",
        "strain has failed",
        "changed the wing",
    ]
    assert model.last_tap == 3 and 3 in model.pictures and model.theory["averaged_fold_hz"] == 26.0


def test_what_it_does_not_know_changes_nothing() -> None:
    model = begun()
    assert told(model, {"something": 1}, event(1.0, "sync"), {"event": {"tick": 1, "kind": "take"}}) == set()
