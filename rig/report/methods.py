"""How the numbers of a report come about, with the published methods they rest on."""

from __future__ import annotations

METHODS = (
    (
        "Flap rate",
        "unwrapped crank phase from end to end of the dwell, divided by the time; its uncertainty includes "
        "slow wander.",
    ),
    (
        "Mean angle and load",
        "averages over whole crank turns, so that the flap ripple cancels; a load below its own uncertainty "
        "is told as not resolvable.",
    ),
    (
        "Decay rate and slow mode",
        "the record after a tap is fitted with exp(−σt)[c₁ C(q,t) + c₂ S(q,t)] + offset + drift + two crank "
        "harmonics, q = ω² of either sign, ω the damped angular frequency, by variable projection [1]. The "
        "95 % interval is the widest of ordinary least squares, a robust one for correlated residuals [2], "
        "and a state-space likelihood of the records before and after the tap. An interval that touches an "
        "end stop is not fitted.",
    ),
    (
        "Slow stiffness",
        "κ = ω² + σ², per unit inertia; negative when the body diverges.",
    ),
    (
        "Regime",
        "stable or unstable only where the interval of the decay rate, widened by a guard band, lies on one "
        "side of zero [3] and the checks for contact, friction and bouncing pass; else undetermined.",
    ),
    (
        "Boundary",
        "falling: mean angle and slow stiffness of all held levels are fitted together with one averaged "
        "potential whose edge is itself a parameter [4, 5]; interval by profile likelihood. Rising: between "
        "the last level at which the body was not captured and the first at which it was. The voltage "
        "follows from the local line of flap rate on drive and moves with winding temperature; the flap "
        "rate does not.",
    ),
    (
        "Theory",
        "averaged potential of the vibrated body [4, 5]; multipliers of the periodic orbit (Floquet); "
        "Mathieu functions for the undamped limit [6].",
    ),
    (
        "Numbers",
        "rounded to two significant digits of their standard uncertainty [7]; intervals are 95 %.",
    ),
)

REFERENCES = (
    "G. H. Golub, V. Pereyra, SIAM J. Numer. Anal. 10 (1973) 413, doi 10.1137/0710036.",
    "W. K. Newey, K. D. West, Econometrica 55 (1987) 703, doi 10.2307/1913610.",
    "JCGM 106:2012, The role of measurement uncertainty in conformity assessment.",
    "P. L. Kapitza, Zh. Eksp. Teor. Fiz. 21 (1951) 588.",
    "L. D. Landau, E. M. Lifshitz, Mechanics, § 30.",
    "N. W. McLachlan, Theory and Application of Mathieu Functions, Oxford 1947.",
    "JCGM 100:2008 (GUM), 7.2.6.",
)
