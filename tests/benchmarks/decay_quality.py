"""How good the decay fit is: error against the attainable bound, coverage, failures, wrong regimes, speed.

    python tests/benchmarks/decay_quality.py            all draws (about five minutes on one core)
    python tests/benchmarks/decay_quality.py --small    a tenth of them

The last full result is committed beside this file in decay_quality.txt. Times are told as ratios to one plain
scipy.optimize.curve_fit call (offset and drift, no ripple, started near the truth) on the same record,
interleaved in the same process.
"""

from __future__ import annotations

import argparse
import contextlib
import sys
import time
import warnings
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from scipy.optimize import OptimizeWarning, curve_fit

sys.path.insert(0, str(Path(__file__).parents[1] / "decay"))

from synthetic_decay import DEG, Case, Made, bound, driven_bound, envelope, make

from analysis.decay import fit_decay
from analysis.regime import decide

COLOURED = {
    "disturbance 0.1 deg, 0.3 s": Case(ambient=0.1 * DEG, quiet_s=20.0),
    "mode driven 0.15 deg, tap 5 deg": Case(
        driven=0.15 * DEG, amplitude=5.0 * DEG, window_s=4.0, quiet_s=20.0
    ),
    "mode driven 0.5 deg, tap 2 deg": Case(driven=0.5 * DEG, amplitude=2.0 * DEG, window_s=4.0, quiet_s=20.0),
}


@dataclass(frozen=True)
class Quality:
    """Result of one family of draws."""

    draws: int
    failures: int
    ratio: float  # mean square error over the bound
    coverage: float
    milliseconds: float
    speed: float  # median time over that of a plain curve_fit


def white(draws: int, seed: int, *, timed: bool = True) -> Quality:
    """Random envelope in white noise with quantisation and ripple."""
    rng = np.random.default_rng(seed)
    ratios, inside, ours, plain, failures = [], [], [], [], 0
    for _ in range(draws):
        case = envelope(rng)
        made = make(case, rng)
        start = time.perf_counter()
        fit = fit_decay(made.time_s, made.angle_rad, made.crank_rad)
        ours.append(time.perf_counter() - start)
        if timed:
            plain.append(plain_seconds(case, made))
        if fit.status != "ok" or not np.isfinite(fit.decay_std_per_s):
            failures += 1
            continue
        error = fit.decay_per_s - case.decay_per_s
        ratios.append(error**2 / bound(case, made))
        inside.append(fit.decay_low_per_s <= case.decay_per_s <= fit.decay_high_per_s)
    speed = float(np.median(ours) / np.median(plain)) if timed else float("nan")
    return Quality(
        draws, failures, float(np.mean(ratios)), float(np.mean(inside)), 1e3 * float(np.median(ours)), speed
    )


def plain_seconds(case: Case, made: Made) -> float:
    """Time of one curve_fit call without ripple terms."""

    def model(t, sigma, omega, a, b, offset, drift):  # type: ignore[no-untyped-def]
        return np.exp(-sigma * t) * (a * np.cos(omega * t) + b * np.sin(omega * t)) + offset + drift * t

    guess = [
        case.decay_per_s + 0.1,
        2.02 * np.pi * case.mode_hz,
        case.amplitude,
        0.0,
        made.angle_rad.mean(),
        0.0,
    ]
    start = time.perf_counter()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", OptimizeWarning)
        warnings.simplefilter("ignore", RuntimeWarning)
        with contextlib.suppress(RuntimeError):  # it gives up on some; the time it took counts all the same
            curve_fit(model, made.time_s, made.angle_rad, p0=guess, maxfev=2000)
    return time.perf_counter() - start


def coloured(case: Case, draws: int, seed: int) -> Quality:
    """One kind of correlated noise, with the quiet record before the tap."""
    rng = np.random.default_rng(seed)
    errors, inside, ours, failures = [], [], [], 0
    for _ in range(draws):
        drawn = Case(**{**vars(case), "phase": float(rng.uniform(0.0, 2.0 * np.pi))})
        made = make(drawn, rng)
        start = time.perf_counter()
        fit = fit_decay(made.time_s, made.angle_rad, made.crank_rad, quiet=made.quiet)
        ours.append(time.perf_counter() - start)
        if fit.status != "ok":
            failures += 1
            continue
        errors.append(fit.decay_per_s - case.decay_per_s)
        inside.append(fit.decay_low_per_s <= case.decay_per_s <= fit.decay_high_per_s)
    ratio = float(np.mean(np.square(errors))) / driven_bound(case)
    return Quality(draws, failures, ratio, float(np.mean(inside)), 1e3 * float(np.median(ours)), float("nan"))


def at_zero(draws: int, seed: int, *, quiet_s: float = 0.0) -> float:
    """Share of definite, hence wrong, regimes when the true decay rate is zero."""
    rng = np.random.default_rng(seed)
    wrong = 0
    for _ in range(draws):
        case = Case(
            decay_per_s=0.0,
            amplitude=0.5 * DEG,
            window_s=2.0,
            ambient=0.05 * DEG,
            phase=float(rng.uniform(0.0, 2.0 * np.pi)),
            quiet_s=quiet_s,
        )
        made = make(case, rng)
        fit = fit_decay(made.time_s, made.angle_rad, made.crank_rad, quiet=made.quiet)
        wrong += decide(fit).regime != "undetermined"
    return wrong / draws


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--small", action="store_true")
    parser.add_argument("--seed", type=int, default=20240)
    arguments = parser.parse_args()
    share = 0.1 if arguments.small else 1.0
    seed = arguments.seed
    fit_decay(*(lambda m: (m.time_s, m.angle_rad, m.crank_rad))(make(Case(), np.random.default_rng(0))))
    print(f"seed {seed}")
    print(
        f"{'records':36} {'draws':>6} {'failed':>6} {'MSE/bound':>9} {'coverage':>8} {'ms':>6} {'/curve_fit':>10}"
    )
    rows = [("white, quantised, ripple: envelope", white(int(3000 * share), seed))]
    for offset, (name, case) in enumerate(COLOURED.items(), start=1):
        rows.append((name, coloured(case, int(400 * share), seed + offset)))
    for name, row in rows:
        print(
            f"{name:36} {row.draws:6d} {row.failures:6d} {row.ratio:9.3f} {row.coverage:8.3f} "
            f"{row.milliseconds:6.1f} {row.speed:10.2f}"
        )
    for label, quiet in (("tap record alone", 0.0), ("with 20 s quiet record", 20.0)):
        wrong = at_zero(int(2000 * share), seed + 9, quiet_s=quiet)
        print(f"wrong definite regime at decay rate zero, {label}: {wrong:.4f} of {int(2000 * share)}")


if __name__ == "__main__":
    main()
