"""Equations of state fitted to the static energy: for reporting, never a step of the prediction.

References
----------
P. Vinet et al., J. Phys. C 19, L467 (1986), doi:10.1088/0022-3719/19/20/001;
F. Birch, Phys. Rev. 71, 809 (1947), doi:10.1103/PhysRev.71.809.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from thermex.constants import GPA_PER_EV_A3
from thermex.prediction import EquationOfState

Array = NDArray[np.float64]


def vinet(volume: Array, e0: float, v0: float, b0: float, b1: float) -> Array:
    """Return the Vinet energy (eV) for B₀ in eV/Å³."""
    y = np.cbrt(volume / v0)
    eta = 1.5 * (b1 - 1.0)
    inside = 1.0 - (1.0 - eta * (1.0 - y)) * np.exp(eta * (1.0 - y))
    return np.asarray(e0 + 9.0 * b0 * v0 / eta**2 * inside)


def birch_murnaghan(volume: Array, e0: float, v0: float, b0: float, b1: float) -> Array:
    """Return the third-order Birch–Murnaghan energy (eV) for B₀ in eV/Å³."""
    f = (v0 / volume) ** (2.0 / 3.0) - 1.0
    return np.asarray(e0 + 9.0 / 16.0 * v0 * b0 * (f**3 * b1 + f**2 * (6.0 - 4.0 * (v0 / volume) ** (2.0 / 3.0))))


_FORMS: dict[str, Callable[..., Array]] = {
    "Vinet": vinet,
    "Birch–Murnaghan, third order": birch_murnaghan,
}


def fit(volume: Array, energy: Array, bulk_GPa: float, slope: float) -> tuple[EquationOfState, ...]:
    """Fit both equations of state to energies (eV) at volumes (Å³).

    Parameters
    ----------
    bulk_GPa, slope
        B₀ and B₀′ from which the fit starts.
    """
    from scipy.optimize import curve_fit

    lowest = int(np.argmin(energy))
    start = (energy[lowest], volume[lowest], bulk_GPa / GPA_PER_EV_A3, slope)
    out = []
    for name, form in _FORMS.items():
        try:
            found, _ = curve_fit(form, volume, energy, p0=start, maxfev=4000)
        except RuntimeError:
            continue
        residual = float(np.sqrt(np.mean((form(volume, *found) - energy) ** 2)))
        out.append(EquationOfState(name, found[1], found[2] * GPA_PER_EV_A3, found[3], residual))
    return tuple(out)
