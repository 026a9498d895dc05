"""Response of the static lattice to fields: Born charges, dielectric constants, TO and LO modes."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from thermex import phonons
from thermex.constants import COULOMB
from thermex.errors import PolarisationError
from thermex.phonons import MassWeighting
from thermex.potential.dynamical import force_constants_at
from thermex.potential.lattice_sums import Response
from thermex.potential.model import PairModel, Particles
from thermex.prediction import ZoneCentre

Array = NDArray[np.float64]

#: Distance from Γ (fraction of a reciprocal vector) at which the longitudinal limit is taken.
NEAR = 1e-4


def zone_centre(model: PairModel, particles: Particles, masses: Array) -> ZoneCentre | None:
    """Return Z*, ε∞, ε₀ and the modes at Γ; None when nothing is charged.

    With charges Y of the shells and transverse force constants Φ (no macroscopic field),
    Z* = X − Φ_cs Φ_ss⁻¹ Y, ε∞ = 1 + (4π k_C/V) Yᵀ Φ_ss⁻¹ Y, and the cores add
    (4π k_C/V) Z*ᵀ Φ_eff⁻¹ Z* to ε₀.
    """
    if not model.has_charges:
        return None
    size = 3 * len(masses)
    charges = np.array([model.kinds[k].charge for k in particles.kind])
    field = np.kron(charges[:, None], np.eye(3))
    values = force_constants_at(model, particles, np.zeros((1, 3)))[0].real
    front = 4.0 * np.pi * COULOMB / particles.volume
    born, high, effective = field[:size], np.eye(3), values[:size, :size]
    if values.shape[0] > size:
        inner = values[size:, size:]
        refuse_runaway(model, particles, inner)
        response = np.linalg.solve(inner, np.hstack([field[size:], values[size:, :size]]))
        high = high + front * field[size:].T @ response[:, :3]
        born = born - values[:size, size:] @ response[:, :3]
        effective = effective - values[:size, size:] @ response[:, 3:]
    relaxed = np.linalg.pinv(effective, rcond=1e-8, hermitian=True)
    static = high + front * born.T @ relaxed @ born
    weighting = MassWeighting(masses)
    transverse = phonons.frequencies(weighting.dynamical(values[None].astype(complex)))[0]
    along_z = np.array([[0.0, 0.0, NEAR]]) @ particles.lattice.T / particles.volume ** (1.0 / 3.0)
    near = force_constants_at(model, particles, along_z)
    longitudinal = phonons.frequencies(weighting.dynamical(near))[0]
    return ZoneCentre(
        born.reshape(-1, 3, 3),
        high,
        static,
        _settled(transverse),
        _settled(longitudinal),
    )


def refuse_runaway(model: PairModel, particles: Particles, inner: Array) -> None:
    """Raise :class:`PolarisationError` when the shells have no stable place, naming the ion."""
    lowest, vectors = np.linalg.eigh(0.5 * (inner + inner.T))
    if lowest[0] > 0.0:
        return
    shells = [int(k) for k in particles.kind if model.kinds[int(k)].is_shell]
    share = (vectors[:, 0].reshape(-1, 3) ** 2).sum(axis=1)
    symbol = model.kinds[shells[int(np.argmax(share))]].symbol
    raise PolarisationError(
        f"the shell of {symbol} runs away from its core (lowest force constant {lowest[0]:.3g} eV/Å²)",
        where=f"potential.polarisable.{symbol}",
        fix="raise spring_constant or lower shell_charge",
    )


def refuse_runaway_shells(model: PairModel, particles: Particles, response: Response) -> None:
    """Raise :class:`PolarisationError` when the shells of a static lattice have no stable place."""
    cores = sum(not model.kinds[int(k)].is_shell for k in particles.kind)
    if cores < particles.size:
        start = 6 + 3 * cores
        refuse_runaway(model, particles, response.hessian[start:, start:])


def _settled(frequencies: Array) -> Array:
    """Set the three acoustic modes, zero up to rounding, to exactly zero."""
    out = frequencies.copy()
    out[np.argsort(np.abs(out))[:3]] = 0.0
    return np.sort(out)
