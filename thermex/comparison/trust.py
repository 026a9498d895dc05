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
    parts = [_numerical(m)]
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
        rms = sorted(d.rms_relative_deviation for d in decided)
        span = f"{rms[0]:.0%}" if len(rms) == 1 else f"{rms[0]:.0%} to {rms[-1]:.0%}"
        parts.append(
            f"Potential: what is left against the measurements, {span} rms over the {len(rms)} decided series; what "
            "the method still misses and the error of the measurements are inside."
        )
    else:
        parts.append("Potential: no measured series decides here.")
    return " ".join(parts)


def _numerical(m: Modelled) -> str:
    """Say how large the numerical error of the α that is compared is, from 100 K on."""
    good = np.isfinite(m.relative_error) & (m.temperature >= 100.0)
    if not good.any():
        return "Numerical: no temperature of 100 K or more was predicted."
    worst = int(np.argmax(np.where(good, m.relative_error, -1.0)))
    inside = " (that of the correction included)" if m.temperature[worst] >= m.starts_K else ""
    return (
        f"Numerical: the error of the α compared is at most {m.relative_error[worst]:.1%}{inside}, "
        f"at {m.temperature[worst]:.0f} K, from 100 K on."
    )


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
