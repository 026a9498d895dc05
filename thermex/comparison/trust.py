"""How far a prediction can be trusted: the numerical, the method and the potential error apart."""

from __future__ import annotations

import numpy as np

from thermex.comparison.deviation import Deviation
from thermex.comparison.modelled import Modelled
from thermex.prediction import Prediction

#: Root-mean-square displacement along one axis over the nearest distance at which anharmonic motion is
#: no longer small, after F. A. Lindemann, Phys. Z. 11, 609 (1910): melting near 0.1.
LINDEMANN = 0.07


def lindemann_ratio(prediction: Prediction) -> np.ndarray:
    """Return √(⟨u²⟩/3)/d of the atom that moves most, shape (nT,)."""
    largest = prediction.mean_square_displacement_A2.max(axis=1)
    return np.asarray(np.sqrt(largest / 3.0) / prediction.static.nearest_distance_A)


def trust(m: Modelled, deviations: tuple[Deviation, ...]) -> str:
    """Return one paragraph that separates the three errors of α."""
    p = m.prediction
    good = np.isfinite(p.alpha_relative_error) & (p.temperature_K >= 100.0)
    numerical = float(np.nanmax(p.alpha_relative_error[good])) if good.any() else float("nan")
    parts = [
        f"Numerical: the α of this potential is converged to {numerical:.2g} (relative) or better at 100 K and above."
        if np.isfinite(numerical)
        else "Numerical: no temperature of 100 K or more was predicted."
    ]
    if p.branch_ends:
        parts.append(f"Method: the quasi-harmonic branch ends at {p.valid_to_K:.0f} K.")
    if p.rule is not None and np.isfinite(p.rule.overestimate).any():
        k = int(np.nanargmax(np.where(np.isfinite(p.rule.overestimate), p.temperature_K, -np.inf)))
        parts.append(
            f"By the rule of T_eff/T_end the quasi-harmonic α is expected to be {p.rule.overestimate[k]:.0%} too high "
            f"at {p.temperature_K[k]:.0f} K ({p.rule.low[k]:.0%} to {p.rule.high[k]:.0%})."
        )
    if m.kind != "quasi-harmonic" and p.anharmonic is not None:
        parts.append(f"The comparison uses α with the {m.kind} correction from {p.anharmonic.starts_K:.0f} K.")
    else:
        parts.append("The comparison uses the quasi-harmonic α.")
    ratio = lindemann_ratio(p)
    soft = np.isfinite(ratio) & (ratio > LINDEMANN)
    if soft.any():
        parts.append(
            f"Above {p.temperature_K[soft][0]:.0f} K the rms displacement exceeds {LINDEMANN:.0%} of the nearest "
            "distance (Lindemann 1910: melting near 10 %): large-amplitude motion, marked as anharmonic."
        )
    decided = [d for d in deviations if d.verdict != "undecided" and np.isfinite(d.rms_relative_deviation)]
    if decided:
        rms = float(np.median([d.rms_relative_deviation for d in decided]))
        parts.append(f"Potential: what is left against the measurements, {rms:.0%} rms (median of the series decided).")
    else:
        parts.append("Potential: no measured series decides here.")
    return " ".join(parts)


def static_fit_note(m: Modelled, room_lattice_A: float | None) -> str | None:
    """Say what zero-point and thermal expansion add when the static a was fitted to room temperature."""
    p = m.prediction
    static = p.static.lattice_A.get("a")
    if static is None or room_lattice_A is None or abs(static / room_lattice_A - 1.0) > 2e-3:
        return None
    cold = p.zero_point_lattice_A.get("a", float("nan"))
    room = float(m.at(m.lattice["a"], np.array([298.15]))[0])
    text = (
        f"The static lattice parameter ({static:.4f} Å) equals the measured one at room temperature "
        f"({room_lattice_A:.4f} Å): zero-point motion adds {cold / static - 1.0:+.2%} (a = {cold:.4f} Å at 0 K)"
    )
    if np.isfinite(room):
        text += f" and heat up to 298 K makes it {room / static - 1.0:+.2%} in all (a = {room:.4f} Å)"
    return text + ". Compare expansion, not absolute a."
