"""Decay rate, frequency and stiffness of the slow mode after a tap."""

from analysis.decay.fit import fit_decay
from analysis.decay.level import LevelDecay, fit_level
from analysis.decay.record import TapRecord
from analysis.decay.result import DecayFit

__all__ = ["DecayFit", "LevelDecay", "TapRecord", "fit_decay", "fit_level"]
