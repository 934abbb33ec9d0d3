"""Synthetic body-angle records with known decay, and the bound no unbiased estimate can beat."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
DEG = np.pi / 180.0
COUNT = 2.0 * np.pi / 8192


@dataclass(frozen=True)
class Case:
    """What a record is made of; angles in rad, rates in 1/s, frequencies in Hz."""

    mode_hz: float = 2.0
    decay_per_s: float = 0.5
    amplitude: float = 3.0 * DEG
    phase: float = 0.4
    window_s: float = 3.0
    flap_hz: float = 20.0
    ripple: tuple[float, float] = (0.5 * DEG, 0.15 * DEG)
    wander: float = 0.003
    noise: float = 0.03 * DEG
    drift: float = 0.05 * DEG
    offset: float = 8.0 * DEG
    quantised: bool = True
    rate_hz: float = 1000.0
    ambient: float = 0.0  # rms of Ornstein-Uhlenbeck disturbance
    ambient_s: float = 0.3
    driven: float = 0.0  # rms of the mode under white torque
    quiet_s: float = 0.0


@dataclass(frozen=True)
class Made:
    """A record: time, angle, crank, the quiet triple before it (or None), and the true crank phase."""

    time_s: FloatArray
    angle_rad: FloatArray
    crank_rad: FloatArray
    quiet: tuple[FloatArray, FloatArray, FloatArray] | None
    true_crank: FloatArray


def envelope(rng: np.random.Generator) -> Case:
    """A draw from the wide envelope the estimator is held to."""
    mode_hz = float(np.exp(rng.uniform(np.log(0.5), np.log(5.0))))
    window = float(rng.uniform(max(1.0, 1.0 / mode_hz), 6.0))
    omega = 2.0 * np.pi * mode_hz
    if rng.random() < 0.2:
        decay = -float(np.log(rng.uniform(1.0, 20.0))) / window
        amplitude = float(np.exp(rng.uniform(np.log(0.5), np.log(10.0)))) * DEG * np.exp(decay * window)
    else:
        ratio = float(np.exp(rng.uniform(np.log(0.005), np.log(0.7))))
        decay = ratio * omega / np.sqrt(1.0 - ratio**2)
        amplitude = float(np.exp(rng.uniform(np.log(0.5), np.log(10.0)))) * DEG
    return Case(
        mode_hz=mode_hz,
        decay_per_s=float(decay),
        amplitude=float(amplitude),
        phase=float(rng.uniform(0.0, 2.0 * np.pi)),
        window_s=window,
        flap_hz=float(rng.uniform(max(8.0, 2.0 * mode_hz), 45.0)),
        ripple=(float(rng.uniform(0.1, 1.0)) * DEG, float(rng.uniform(0.1, 1.0)) * DEG),
        wander=float(rng.uniform(0.001, 0.01)),
        noise=float(rng.uniform(0.01, 0.06)) * DEG,
        drift=float(rng.uniform(-0.05, 0.05)) * DEG,
    )


def ornstein(rng: np.random.Generator, count: int, step: float, rms: float, memory_s: float) -> FloatArray:
    """Exactly discretised Ornstein-Uhlenbeck series started in its stationary state."""
    from scipy.signal import lfilter

    keep = np.exp(-step / memory_s)
    shocks = rng.standard_normal(count) * rms * np.sqrt(1.0 - keep**2)
    shocks[0] = rms * rng.standard_normal()
    return np.asarray(lfilter([1.0], [1.0, -keep], shocks))


def driven_mode(rng: np.random.Generator, count: int, step: float, case: Case) -> FloatArray:
    """Slow mode under white torque with stationary rms `driven`, exact in discrete time."""
    from scipy.linalg import expm, solve_discrete_lyapunov
    from scipy.signal import lfilter

    sigma, omega = case.decay_per_s, 2.0 * np.pi * case.mode_hz
    stiffness = omega**2 + sigma**2
    system = np.array([[0.0, 1.0], [-stiffness, -2.0 * sigma]])
    stationary = np.diag([1.0, stiffness]) * case.driven**2
    move = expm(system * step)
    shock = np.linalg.cholesky(stationary - move @ stationary @ move.T + 1e-30 * np.eye(2))
    assert np.allclose(solve_discrete_lyapunov(move, shock @ shock.T), stationary, rtol=1e-3)
    pushes = shock @ rng.standard_normal((2, count))
    pushes[:, 0] = np.sqrt(np.diag(stationary)) * rng.standard_normal(2)
    # State recursion as one scalar recursion: trace and determinant of the transition matrix.
    trace, determinant = np.trace(move), np.linalg.det(move)
    drive = pushes[0].copy()
    drive[1:] += move[0, 1] * pushes[1, :-1] - move[1, 1] * pushes[0, :-1]
    return np.asarray(lfilter([1.0], [1.0, -trace, determinant], drive))


def make(case: Case, rng: np.random.Generator) -> Made:
    """One noisy record; with `quiet_s` the undisturbed stretch before the tap comes with it."""
    step = 1.0 / case.rate_hz
    before = round(case.quiet_s * case.rate_hz)
    after = round(case.window_s * case.rate_hz)
    total = before + after
    time = step * np.arange(total)
    rate = case.flap_hz * (1.0 + ornstein(rng, total, step, case.wander, 0.5))
    crank = 2.0 * np.pi * np.cumsum(rate) * step + rng.uniform(0.0, 2.0 * np.pi)
    lag = rng.uniform(0.0, 2.0 * np.pi, 2)
    angle = case.offset + case.drift * time
    angle = angle + case.ripple[0] * np.cos(crank + lag[0]) + case.ripple[1] * np.cos(2 * crank + lag[1])
    angle = angle + case.noise * rng.standard_normal(total)
    if case.ambient > 0.0:
        angle = angle + ornstein(rng, total, step, case.ambient, case.ambient_s)
    if case.driven > 0.0:
        angle = angle + driven_mode(rng, total, step, case)
    local = time[before:] - time[before]
    angle[before:] += free_decay(case, local)
    if case.quantised:
        angle = np.round(angle / COUNT) * COUNT
    counts = 2.0 * np.pi / 2048
    seen = np.floor(crank / counts) * counts
    quiet = (time[:before], angle[:before], seen[:before]) if before else None
    return Made(local, angle[before:], seen[before:], quiet, crank[before:])


def free_decay(case: Case, local: FloatArray) -> FloatArray:
    swing = np.cos(2.0 * np.pi * case.mode_hz * local + case.phase)
    return np.asarray(case.amplitude * np.exp(-case.decay_per_s * local) * swing)


def bound(case: Case, made: Made) -> float:
    """Cramer-Rao bound of the decay rate's variance, (1/s)^2: white noise of the case plus quantisation.

    Fisher information of the full model with amplitude, phase, frequency, offset, drift and two crank
    harmonics all unknown.
    """
    time = made.time_s
    decay, omega = case.decay_per_s, 2.0 * np.pi * case.mode_hz
    envelope = case.amplitude * np.exp(-decay * time)
    cosine, sine = np.cos(omega * time + case.phase), np.sin(omega * time + case.phase)
    columns = [-time * envelope * cosine, -time * envelope * sine, envelope * cosine, envelope * sine]
    columns += [np.ones_like(time), time]
    for order in (1, 2):
        columns += [np.cos(order * made.true_crank), np.sin(order * made.true_crank)]
    jacobian = np.column_stack(columns)
    jacobian /= np.linalg.norm(jacobian, axis=0)
    variance = case.noise**2 + (COUNT**2 / 12.0 if case.quantised else 0.0)
    first = jacobian[:, 0]
    rest = jacobian[:, 1:]
    left = first - rest @ np.linalg.lstsq(rest, first, rcond=None)[0]
    norm = np.linalg.norm(time * envelope * cosine)
    return float(variance / (left @ left) / norm**2)


def driven_bound(case: Case) -> float:
    """Bound of the decay rate's variance, (1/s)^2, for correlated noise with the quiet record.

    The Fisher information of a Gaussian record with known noise covariance: the tapped record's mean carries
    (sigma, omega, amplitude, phase, offset, drift), and for a driven mode both records' covariance carries
    sigma and omega as well (half the trace of (C^-1 dC)^2). Block means of 1/60 s without ripple.
    """
    step = 1.0 / 60.0
    total = np.zeros((2, 2))
    for span, tapped in ((case.quiet_s, False), (case.window_s, True)):
        time = step * np.arange(round(span / step))
        theta = np.array([case.decay_per_s, 2.0 * np.pi * case.mode_hz])
        covariance = _covariance(case, time, theta)
        inverse = np.linalg.inv(covariance)
        columns = [np.ones_like(time), time]
        slopes = []
        if tapped:
            swing = np.exp(-theta[0] * time)
            cosine, sine = np.cos(theta[1] * time + case.phase), np.sin(theta[1] * time + case.phase)
            columns += [swing * cosine, swing * sine]
            slopes = [-case.amplitude * time * swing * cosine, -case.amplitude * time * swing * sine]
        nuisance = np.array(columns)
        weighted = nuisance @ inverse
        gram = np.linalg.inv(weighted @ nuisance.T)
        information = np.zeros((2, 2))
        if slopes:
            mean = np.array(slopes)
            across = weighted @ mean.T
            information += mean @ inverse @ mean.T - across.T @ gram @ across
        if case.driven > 0.0:
            changes = []
            for k in range(2):
                shift = np.zeros(2)
                shift[k] = 1e-4
                upper, lower = _covariance(case, time, theta + shift), _covariance(case, time, theta - shift)
                changes.append(inverse @ (upper - lower) / 2e-4)
            information += 0.5 * np.array([[np.trace(a @ b) for b in changes] for a in changes])
        total += information
    return float(np.linalg.inv(total)[0, 0])


def _covariance(case: Case, time: FloatArray, theta: FloatArray) -> FloatArray:
    """Covariance of block means: noise, disturbance, and the mode at the torque that `driven` stands for."""
    lag = np.abs(time[:, None] - time[None, :])
    samples = case.rate_hz * (time[1] - time[0])
    white = (case.noise**2 + (COUNT**2 / 12.0 if case.quantised else 0.0)) / samples
    result = white * np.eye(len(time))
    if case.ambient > 0.0:
        result += case.ambient**2 * np.exp(-lag / case.ambient_s)
    if case.driven > 0.0:
        sigma, omega = theta
        true_sigma, true_omega = case.decay_per_s, 2.0 * np.pi * case.mode_hz
        torque = case.driven**2 * 4.0 * true_sigma * (true_sigma**2 + true_omega**2)
        power = torque / (4.0 * sigma * (sigma**2 + omega**2))
        result += power * np.exp(-sigma * lag) * (np.cos(omega * lag) + sigma / omega * np.sin(omega * lag))
    return np.asarray(result)
