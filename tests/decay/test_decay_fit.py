"""The decay fit: quality on seeded draws, exact cases, independent references, and what it refuses."""

from __future__ import annotations

import lmfit
import numpy as np
import pytest
import statsmodels.api as sm
from synthetic_decay import DEG, Case, bound, envelope, make

from analysis.decay import fit_decay
from analysis.decay.level import fit_level
from analysis.decay.record import TapRecord
from analysis.regime import decide


def test_quality_on_seeded_draws() -> None:
    """150 draws of the random envelope. The mean square error over the Cramer-Rao bound has a standard error of
    about sqrt(2 / 150) = 0.12, coverage of 0.018: a fit twice as bad, or half as sure, fails."""
    rng = np.random.default_rng(5)
    ratios, inside = [], 0
    for _ in range(150):
        case = envelope(rng)
        made = make(case, rng)
        fit = fit_decay(made.time_s, made.angle_rad, made.crank_rad)
        assert fit.status == "ok"
        ratios.append((fit.decay_per_s - case.decay_per_s) ** 2 / bound(case, made))
        inside += fit.decay_low_per_s <= case.decay_per_s <= fit.decay_high_per_s
    assert np.mean(ratios) < 1.35
    assert 0.89 <= inside / 150 <= 0.995


def test_against_lmfit() -> None:
    """lmfit on the same model, every parameter free, started at the truth: the same minimum."""
    case = Case(quantised=False, wander=0.0)
    made = make(case, np.random.default_rng(2))
    fit = fit_decay(made.time_s, made.angle_rad, made.crank_rad)
    t, crank = made.time_s - made.time_s[0], made.crank_rad

    def model(x, sigma, hertz, a, b, offset, drift, c1, s1, c2, s2):  # type: ignore[no-untyped-def]
        swing = np.exp(-sigma * x) * (a * np.cos(2 * np.pi * hertz * x) + b * np.sin(2 * np.pi * hertz * x))
        ripple = c1 * np.cos(crank) + s1 * np.sin(crank) + c2 * np.cos(2 * crank) + s2 * np.sin(2 * crank)
        return swing + offset + drift * x + ripple

    guess = {"sigma": 0.5, "hertz": 2.0, "a": 0.05, "b": 0.0, "offset": 0.14, "drift": 0.0}
    found = lmfit.Model(model).fit(made.angle_rad, x=t, **guess, c1=0.0, s1=0.0, c2=0.0, s2=0.0)
    assert fit.decay_per_s == pytest.approx(found.params["sigma"].value, abs=2e-4)
    assert fit.mode_hz == pytest.approx(found.params["hertz"].value, abs=2e-5)
    assert fit.decay_std_per_s == pytest.approx(found.params["sigma"].stderr, rel=0.25)


def test_robust_interval_against_statsmodels() -> None:
    """Newey-West of statsmodels on the linearised fit, noise with memory: the same size within a third."""
    case = Case(ambient=0.1 * DEG, quantised=False, wander=0.0)
    made = make(case, np.random.default_rng(3))
    fit = fit_decay(made.time_s, made.angle_rad, made.crank_rad)
    t, crank = made.time_s - made.time_s[0], made.crank_rad
    omega = np.sqrt(fit.omega_squared)
    wave = fit.amplitude_rad * np.exp(-fit.decay_per_s * t)
    phase = omega * t + fit.phase_rad
    columns = [
        -t * wave * np.cos(phase),
        -t * wave * np.sin(phase),
        wave * np.cos(phase),
        wave * np.sin(phase),
    ]
    columns += [np.ones_like(t), t, np.cos(crank), np.sin(crank), np.cos(2 * crank), np.sin(2 * crank)]
    reference = sm.OLS(fit.residual_rad, np.column_stack(columns)).fit(
        cov_type="HAC", cov_kwds={"maxlags": 400}
    )
    assert fit.interval == "robust"
    assert fit.decay_std_per_s == pytest.approx(reference.bse[0], rel=0.34)


def test_critical_damping_and_growth() -> None:
    """Critically damped release, sigma 3, t 0.5: (1 + sigma t) exp(-sigma t) = 0.5578254004 (hand calculation)."""
    assert (1.0 + 1.5) * np.exp(-1.5) == pytest.approx(0.5578254004)
    t = np.arange(0.0, 3.0, 1e-3)
    rng = np.random.default_rng(1)
    critical = 0.1 * (1.0 + 3.0 * t) * np.exp(-3.0 * t) + 1e-4 * rng.standard_normal(len(t))
    fit = fit_decay(t, critical, 2 * np.pi * 20.0 * t)
    assert fit.stiffness_per_s2 == pytest.approx(9.0, rel=0.05)
    grown = 0.01 * np.exp(0.8 * t) * np.cos(9.0 * t) + 1e-4 * rng.standard_normal(len(t))
    fit = fit_decay(t, grown, 2 * np.pi * 20.0 * t)
    assert fit.decay_per_s == pytest.approx(-0.8, abs=0.01)
    assert decide(fit).regime == "unstable"


def test_logarithmic_decrement_of_the_handbook() -> None:
    """20 cm to 2 cm in 100 cycles: decrement ln(10)/100 = 0.02303 (worked example of mechanics texts)."""
    t = np.arange(0.0, 100.0, 4e-3)
    angle = 0.2 * np.exp(-np.log(10.0) * t / 100.0) * np.cos(2 * np.pi * t)
    fit = fit_decay(t, angle + 1e-4 * np.random.default_rng(0).standard_normal(len(t)), 2 * np.pi * 15.0 * t)
    assert fit.decay_per_s / fit.mode_hz == pytest.approx(0.02303, rel=2e-3)


@pytest.mark.parametrize("seed", range(3))
def test_correlated_noise_needs_the_quiet_record(seed: int) -> None:
    """A mode driven by random torque: the interval with the quiet record holds, and is wider than white noise's."""
    case = Case(driven=0.5 * DEG, amplitude=2.0 * DEG, window_s=4.0, quiet_s=20.0)
    made = make(case, np.random.default_rng(seed))
    plain = fit_decay(made.time_s, made.angle_rad, made.crank_rad)
    full = fit_decay(made.time_s, made.angle_rad, made.crank_rad, quiet=made.quiet)
    assert full.interval == "driven"
    assert full.decay_std_per_s > 2.0 * plain.decay_std_per_s
    assert full.decay_low_per_s <= case.decay_per_s <= full.decay_high_per_s


def test_regime_at_zero_is_not_made_up() -> None:
    """True decay rate zero, with the quiet record: definite regimes in at most 5 % (here 0 to 3 of 20)."""
    rng = np.random.default_rng(8)
    wrong = 0
    for _ in range(20):
        case = Case(decay_per_s=0.0, amplitude=0.5 * DEG, window_s=2.0, ambient=0.05 * DEG, quiet_s=20.0)
        made = make(case, rng)
        fit = fit_decay(made.time_s, made.angle_rad, made.crank_rad, quiet=made.quiet)
        wrong += decide(fit).regime != "undetermined"
    assert wrong <= 3


def test_level_of_several_taps() -> None:
    rng = np.random.default_rng(4)
    case = Case(driven=0.05 * DEG, window_s=4.0, quiet_s=20.0)
    made = [make(case, rng) for _ in range(3)]
    level = fit_level([TapRecord(m.time_s, m.angle_rad, m.crank_rad) for m in made], made[0].quiet)
    assert level.status == "ok" and level.taps == 3
    assert level.decay_low_per_s <= 0.5 <= level.decay_high_per_s
    single = fit_decay(made[0].time_s, made[0].angle_rad, made[0].crank_rad, quiet=made[0].quiet)
    assert level.decay_std_per_s < single.decay_std_per_s


def test_what_carries_no_decay_rate() -> None:
    rng = np.random.default_rng(6)
    t = np.arange(0.0, 3.0, 1e-3)
    crank = 2 * np.pi * 20.0 * t
    noise = fit_decay(t, 1e-4 * rng.standard_normal(len(t)), crank)
    assert noise.status in ("no_signal", "not_identifiable")
    assert decide(noise).regime == "undetermined"
    bounce = np.clip(0.3 * np.sin(2 * np.pi * 2.7 * t), -0.07, 0.2)
    stopped = fit_decay(t, bounce, crank, stops_rad=(-0.07, 0.2))
    assert stopped.status == "contact" and "stop" in stopped.reason
    assert fit_decay(t[:10], t[:10], crank[:10]).status == "too_short"


@pytest.mark.parametrize(
    ("time", "angle"),
    [([0.0, 1.0], [0.0]), ([0.0, 0.0, 1.0], [0.0, 0.0, 0.0]), ([0.0, 1.0], [0.0, float("nan")])],
)
def test_malformed_arrays_are_the_caller_s_mistake(time: list[float], angle: list[float]) -> None:
    with pytest.raises(ValueError, match="record"):
        fit_decay(time, angle)
