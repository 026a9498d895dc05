"""The rule: how much the quasi-harmonic α is expected to be too high, from t = T_eff/T_end alone."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from thermex.prediction import AnharmonicRule

Array = NDArray[np.float64]

#: Overestimate = FACTOR · t / (1 − t)^EXPONENT; fitted to eight crystals, none held out.
FACTOR, EXPONENT = 0.22, 0.8

#: The factor from crystal to crystal.
SCATTER = (0.18, 0.27)

WORDS = (
    "The quasi-harmonic α is expected to be too high by 0.22 t/(1 − t)^0.8 (0.18 to 0.27 from crystal to "
    "crystal) with t = T_eff/T_end, T_eff the vibrational energy per mode over k_B and T_end the end of the "
    "quasi-harmonic branch. Fitted to classical simulations of eight Lennard-Jones, rock-salt and CsCl-type "
    "crystals, none held out. It does not cover fluorite-type crystals (quasi-harmonic and leading-order α "
    "are both too high there) nor Morse metals (both too low), and it was not tested on polarisable ions or "
    "axial crystals."
)

WORDS_WITHOUT_END = "No rule: the end of the quasi-harmonic branch was not reached, so t = T_eff/T_end is not known."

WORDS_IMAGINARY = (
    "No rule: the branch ends where phonons turn imaginary, and the rule counts from the temperature at which B_T → 0."
)


def overestimate(t: Array, factor: float = FACTOR) -> Array:
    """Return the expected relative overestimate of α, factor · t/(1 − t)^0.8; NaN for t ≥ 1.

    Parameters
    ----------
    t
        Effective temperature over the temperature of the branch end, any shape.
    """
    t = np.asarray(t, dtype=float)
    room = np.where(t < 1.0, 1.0 - t, np.nan)
    return np.asarray(factor * t * room**-EXPONENT)


def anharmonic_rule(effective_K: Array, end_K: float) -> AnharmonicRule:
    """Apply the rule at every temperature of a prediction.

    Parameters
    ----------
    effective_K
        Shape (nT,): T_eff = E_vib/(number of modes · k_B), zero-point energy included; NaN where the
        prediction has no answer.
    end_K
        T_end, the temperature at which the quasi-harmonic minimum disappears; inf when not reached.
    """
    effective = np.asarray(effective_K, dtype=float)
    if not np.isfinite(end_K):
        return no_rule(effective, WORDS_WITHOUT_END)
    t = effective / end_K
    return AnharmonicRule(
        t, overestimate(t), overestimate(t, SCATTER[0]), overestimate(t, SCATTER[1]), float(end_K), WORDS
    )


def no_rule(effective_K: Array, words: str) -> AnharmonicRule:
    """Return the rule without a number at any temperature, and the reason in words."""
    nothing = np.full(np.shape(effective_K), np.nan)
    return AnharmonicRule(nothing, nothing, nothing, nothing, float("inf"), words)
