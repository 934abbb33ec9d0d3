"""How often a verdict is expected to be wrong, and what this session cannot tell."""

from __future__ import annotations

from analysis.counting import counted
from rig.description import RigDescription
from rig.report.rounding import bare
from rig.report.wording import sentence
from rig.results import SessionResult


def verdicts_at_95(result: SessionResult) -> int:
    """Statements of this session that rest on a 95 % interval: definite regimes and located boundaries."""
    regimes = sum(level.regime in ("stable", "unstable") for level in result.levels)
    boundaries = sum(side.kind != "not_located" for side in (result.falling, result.rising))
    return regimes + boundaries


def expected_wrong(result: SessionResult) -> str:
    """The number of wrong verdicts to expect by chance, as a sentence."""
    count = verdicts_at_95(result)
    if count == 0:
        return "No statement of this session rests on a 95 % interval."
    verdicts = "1 verdict rests" if count == 1 else f"{count} verdicts rest"
    return (
        f"{verdicts} on 95 % intervals. Expected to be wrong by chance alone, even with every assumption "
        f"right: {bare(0.05 * count, 2)} on average. Which, the data cannot say."
    )


def limits_and_doubts(rig: RigDescription, result: SessionResult) -> list[str]:
    """What limits the conclusions of this session, each in a sentence or two."""
    doubts = []
    if rig.simulated:
        doubts.append(
            "Simulated rig: no physical board was involved. The numbers show how the method behaves on a "
            "known mechanism; they say nothing of a built one."
        )
    doubts.append(expected_wrong(result))
    doubts += [sentence(remark) for remark in result.remarks]
    excluded = sum(not tap.accepted for tap in result.taps)
    if excluded:
        were = "was" if excluded == 1 else "were"
        share = f"{excluded} of {counted(len(result.taps), 'tap')} {were} left out; each is listed with its reason."
        doubts.append(share)
    undetermined = sum(level.regime == "undetermined" for level in result.levels)
    if undetermined:
        doubts.append(
            f"{undetermined} of {counted(len(result.levels), 'level')} "
            f"{'stays' if undetermined == 1 else 'stay'} undetermined; the reasons stand in the "
            "table."
        )
    for name, finding in (("vibrational", result.vibration), ("passive", result.passivity)):
        if finding.verdict == "not_testable":
            doubts.append(f"This session cannot show that the hold is {name}. {sentence(finding.reason)}")
    if rig.unknown:
        doubts.append(
            f"Mechanism constants not known: {', '.join(rig.unknown)}. Theory that needs them is not "
            "testable."
        )
    if result.theory.reason:
        doubts.append(f"Theory: {sentence(result.theory.reason)}")
    if result.lost_rows or result.lost_frames:
        doubts.append(
            f"{counted(result.lost_rows, 'row')} and {counted(result.lost_frames, 'frame')} were lost; "
            "intervals with gaps are not fitted."
        )
    doubts.append(
        "A drive held by a tap of a given size is not held for every larger one: the basin of the held "
        "state shrinks to nothing at the boundary. One decay rate stands for a whole interval; where "
        "damping depends on amplitude it belongs to neither end."
    )
    return doubts
