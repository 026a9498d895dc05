"""Elastic stiffness of the static lattice from the exact strain derivatives of its energy."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from thermex.constants import GPA_PER_EV_A3
from thermex.errors import UnstableCrystalError
from thermex.potential.lattice_sums import Response

Array = NDArray[np.float64]

_TRACE = np.array([1.0, 1.0, 1.0, 0.0, 0.0, 0.0])


def stiffness(response: Response, volume: float, pressure_GPa: float) -> Array:
    """Return the 6×6 stiffness (GPa, Voigt), inner coordinates and shells relaxed.

    C = (H_εε − H_εu H_uu⁺ H_uε)/V for the energy U + PV, which is what stability under pressure P
    asks for (M. Born and K. Huang, Dynamical Theory of Crystal Lattices, 1954).
    """
    hessian = response.hessian
    clamped, coupling, inner = hessian[:6, :6], hessian[:6, 6:], hessian[6:, 6:]
    relaxed = clamped - coupling @ np.linalg.pinv(inner, rcond=1e-9, hermitian=True) @ coupling.T
    load = pressure_GPa / GPA_PER_EV_A3 * np.outer(_TRACE, _TRACE)
    return np.asarray(relaxed / volume * GPA_PER_EV_A3 + load * GPA_PER_EV_A3)


def lowest_eigenvalue(stiffness_GPa: Array) -> float:
    """Return the smallest eigenvalue of the stiffness in the Mandel basis (Born criterion: positive)."""
    mandel = np.diag([1.0, 1.0, 1.0, np.sqrt(2.0), np.sqrt(2.0), np.sqrt(2.0)])
    return float(np.linalg.eigvalsh(mandel @ stiffness_GPa @ mandel).min())


def hydrostatic_modulus(stiffness_GPa: Array) -> float:
    """Return the bulk modulus under hydrostatic pressure, 1/(Σ of the 3×3 block of the compliance)."""
    return float(1.0 / np.linalg.inv(stiffness_GPa)[:3, :3].sum())


def refuse_soft(stiffness_GPa: Array, where: str) -> None:
    """Raise :class:`UnstableCrystalError` when the Born criterion fails."""
    lowest = lowest_eigenvalue(stiffness_GPa)
    if lowest <= 0.0:
        c = stiffness_GPa
        raise UnstableCrystalError(
            f"elastically unstable: the smallest eigenvalue of the stiffness is {lowest:.3g} GPa "
            f"(C11 {c[0, 0]:.3g}, C12 {c[0, 1]:.3g}, C44 {c[3, 3]:.3g} GPa), so long shear waves are soft",
            where=where,
            fix="this structure is not a minimum of the potential: check both",
        )


def sound_speeds(stiffness_GPa: Array, density_u_A3: float, direction: Array) -> Array:
    """Return the three sound speeds (km/s) along a direction, from the Christoffel equation.

    Valid at zero pressure.
    """
    n = direction / np.linalg.norm(direction)
    index = np.array([[0, 5, 4], [5, 1, 3], [4, 3, 2]])
    full = stiffness_GPa[index[:, :, None, None], index[None, None, :, :]]
    christoffel = np.einsum("iklj,k,l->ij", full.transpose(0, 1, 2, 3), n, n)
    # GPa / (u/Å³) in (km/s)²: 1 u/Å³ = 1660.539 kg/m³
    eigenvalues = np.linalg.eigvalsh(0.5 * (christoffel + christoffel.T))
    return np.asarray(np.sqrt(np.maximum(eigenvalues, 0.0) * 1e9 / (density_u_A3 * 1660.53906660)) * 1e-3)
