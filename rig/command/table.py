"""Results as text for a terminal: the level table and the boundary."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from rig.results import Boundary, LevelResult, Measured, SessionResult

HEADINGS = (
    ("direction", "<"),
    ("drive V", ">"),
    ("flap Hz", ">"),
    ("mean deg", ">"),
    ("load N", ">"),
    ("mode Hz", ">"),
    ("decay 1/s", ">"),
    ("95 %", ">"),
    ("back/taps", ">"),
    ("regime", "<"),
    ("state", "<"),
)


def number(measured: Measured, digits: int) -> str:
    """The value, or a dash where it is not known."""
    return "-" if measured.value is None else f"{measured.value:.{digits}f}"


def interval(measured: Measured, digits: int) -> str:
    if measured.low is None or measured.high is None:
        return "-"
    return f"{measured.low:.{digits}f}..{measured.high:.{digits}f}"


def _cells(level: LevelResult) -> tuple[str, ...]:
    return (
        level.direction,
        number(level.drive_v, 2),
        number(level.flap_hz, 2),
        number(level.mean_angle_deg, 1),
        number(level.load_n, 3),
        number(level.mode_hz, 3),
        number(level.decay_per_s, 3),
        interval(level.decay_per_s, 2),
        f"{level.returned}/{level.taps}",
        level.regime,
        level.state.replace("_", " "),
    )


def level_table(levels: Sequence[LevelResult]) -> str:
    """Aligned columns, one line a level."""
    rows = [tuple(name for name, _ in HEADINGS), *(_cells(level) for level in levels)]
    widths = [max(len(row[column]) for row in rows) for column in range(len(HEADINGS))]
    lines = []
    for row in rows:
        cells = (
            f"{cell:{side}{width}}" for cell, (_, side), width in zip(row, HEADINGS, widths, strict=True)
        )
        lines.append("  ".join(cells).rstrip())
    lines.insert(1, "  ".join("-" * width for width in widths))
    return "\n".join(lines)


def boundary_line(name: str, boundary: Boundary) -> str:
    """One sentence for one side of the boundary."""
    if boundary.kind == "not_located":
        return f"boundary {name}: not located ({boundary.reason})"
    flap, drive = boundary.flap_hz, boundary.drive_v
    line = f"boundary {name} ({boundary.kind}): {number(flap, 2)} Hz [{interval(flap, 2)}]"
    if drive.value is not None:
        line += f", {number(drive, 3)} V [{interval(drive, 3)}]"
    return line


def sampler_losses(samplers: Mapping[str, int]) -> list[str]:
    """A sentence for each sampler of text lines that lost some: its name and how many were damaged."""
    return [
        f"{count} damaged lines of sampler {name} were left out"
        if count > 1
        else f"1 damaged line of sampler {name} was left out"
        for name, count in samplers.items()
        if count
    ]


def summary(result: SessionResult) -> str:
    """Level table, both boundaries, theory, findings and remarks."""
    lines = [level_table(result.levels), ""]
    lines.append(boundary_line("falling", result.falling))
    lines.append(boundary_line("rising", result.rising))
    theory = result.theory
    told = (
        ("averaged fold", theory.averaged_fold_hz),
        ("Floquet", theory.floquet_hz),
        ("Mathieu", theory.mathieu_hz),
    )
    known = ", ".join(f"{name} {value:.2f} Hz" for name, value in told if value is not None)
    if known:
        lines.append(f"theory: {known}")
    elif theory.reason:
        lines.append(f"theory: not testable ({theory.reason})")
    for name, finding in (
        ("passive", result.passivity),
        ("vibrational", result.vibration),
        ("not friction", result.friction),
    ):
        lines.append(f"{name}: {finding.verdict.replace('_', ' ')} ({finding.reason})")
    lines.extend(result.remarks)
    if result.lost_rows or result.lost_frames:
        lines.append(f"lost: {result.lost_rows} rows, {result.lost_frames} frames")
    return "\n".join(lines)
