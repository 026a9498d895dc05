"""Thermodynamics of harmonic oscillators: sums over frequencies, zero-point energy included."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from thermex.constants import BOLTZMANN, PLANCK_THZ

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class OscillatorSums:
    """Weighted sums over all modes; shape (nT, …) each, per primitive cell."""

    energy: Array
    """Helmholtz energy, eV."""
    entropy: Array
    """eV/K."""
    heat: Array
    """Heat capacity at constant strain, eV/K."""


def sums(frequencies: Array, weights: Array, temperature: Array) -> OscillatorSums:
    """Sum F, S and C over modes.

    Parameters
    ----------
    frequencies
        Shape (…, nq, modes), THz, all positive.
    weights
        Shape (nq,), sum 1.
    temperature
        Shape (nT,), K; T = 0 gives the zero-point energy.
    """
    flat = PLANCK_THZ * frequencies
    zero_point = 0.5 * np.einsum("...qm,q->...", flat, weights)
    shape = (len(temperature), *frequencies.shape[:-2])
    energy, entropy, heat = np.empty(shape), np.empty(shape), np.empty(shape)
    for k, kelvin in enumerate(temperature):
        if kelvin <= 0.0:
            energy[k], entropy[k], heat[k] = zero_point, 0.0, 0.0
            continue
        kt = BOLTZMANN * kelvin
        x = flat / kt
        decay = np.exp(-x)
        log_term = np.log1p(-decay)
        occupied = decay / (1.0 - decay)
        free = np.einsum("...qm,q->...", log_term, weights)
        energy[k] = zero_point + kt * free
        entropy[k] = BOLTZMANN * (np.einsum("...qm,q->...", x * occupied, weights) - free)
        heat[k] = BOLTZMANN * np.einsum("...qm,q->...", x * x * occupied * (1.0 + occupied), weights)
    return OscillatorSums(energy, entropy, heat)


def mode_heat(frequencies: Array, kelvin: float) -> Array:
    """Return the heat capacity of each mode in units of k_B, same shape as ``frequencies``."""
    if kelvin <= 0.0:
        return np.zeros_like(frequencies)
    x = np.minimum(PLANCK_THZ * frequencies / (BOLTZMANN * kelvin), 700.0)
    return np.asarray((x / (2.0 * np.sinh(0.5 * x))) ** 2)


def mean_energy(frequencies: Array, weights: Array, kelvin: float) -> float:
    """Return the vibrational energy per primitive cell, eV, zero point included."""
    quantum = PLANCK_THZ * frequencies
    half = 0.5 * quantum
    if kelvin > 0.0:
        half = half / np.tanh(np.minimum(half / (BOLTZMANN * kelvin), 350.0))
    return float(np.einsum("qm,q->", half, weights))


def debye_temperature_of_moment(frequencies: Array, weights: Array) -> float:
    """Return θ_D from the second moment: k θ = h √(5⟨ν²⟩/3), K."""
    second = float(np.einsum("qm,q->", frequencies**2, weights)) / frequencies.shape[1]
    return float(PLANCK_THZ * np.sqrt(5.0 / 3.0 * second) / BOLTZMANN)


def debye_heat(ratio: Array) -> Array:
    """Return the Debye heat capacity C/(3N k_B) as a function of θ/T."""
    nodes, weights = np.polynomial.legendre.leggauss(60)
    ratio = np.asarray(ratio, dtype=float)
    upper = np.minimum(ratio, 60.0)
    x = 0.5 * upper[..., None] * (nodes + 1.0)
    integrand = np.where(x > 1e-8, x**4 * np.exp(-x) / np.expm1(-np.maximum(x, 1e-8)) ** 2, x**2)
    integral = 0.5 * upper * np.einsum("...k,k->...", integrand, weights)
    return np.asarray(3.0 * integral / np.maximum(ratio, 1e-12) ** 3)


def debye_temperature_of_heat(heat_fraction: Array, temperature: Array) -> Array:
    """Return θ_D(T) whose Debye heat capacity is C/(3N k_B) = ``heat_fraction``; NaN where undefined."""
    grid = np.logspace(-2, 3.5, 600)
    table = debye_heat(grid)
    out = np.full(len(temperature), np.nan)
    good = (temperature > 0) & (heat_fraction > table[-1]) & (heat_fraction < 0.9995)
    ratio = np.exp(np.interp(-np.log(heat_fraction[good]), -np.log(table), np.log(grid)))
    out[good] = ratio * temperature[good]
    return out
