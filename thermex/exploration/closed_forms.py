"""Closed forms for −A/rᵐ + B/rⁿ lattices: guides beside a sweep, never a step of it.

References
----------
E. Grüneisen, Ann. Phys. 344, 257 (1912); J. C. Slater, Introduction to Chemical Physics (1939);
J. S. Dugdale and D. K. C. MacDonald, Phys. Rev. 89, 832 (1953), doi:10.1103/PhysRev.89.832;
V. Ya. Vashchenko and V. N. Zubarev, Sov. Phys. Solid State 5, 653 (1963); M. Born and A. Landé (1918).
"""

from __future__ import annotations

from thermex.constants import COULOMB, GPA_PER_EV_A3

#: Madelung constant of rock salt, nearest-neighbour distance (E. Madelung 1918).
MADELUNG_ROCK_SALT = 1.747564594633


def pressure_derivative(n: float, m: float) -> float:
    """Return B₀′ = (m + n + 6)/3 of a static lattice of two inverse powers."""
    return (m + n + 6.0) / 3.0


def gruneisen_forms(n: float, m: float) -> dict[str, float]:
    """Return γ by Dugdale–MacDonald, Slater and the free-volume form."""
    return {
        "Dugdale–MacDonald": (m + n + 3.0) / 6.0,
        "Slater": (m + n + 5.0) / 6.0,
        "free volume": (m + n + 1.0) / 6.0,
    }


def born_lande_modulus(n: float, charge: float, distance: float) -> float:
    """Return B₀ = (n − 1) M e² Z² k_C/(18 r₀⁴) of rock salt, GPa; r₀ in Å, charge in e."""
    return (n - 1.0) * MADELUNG_ROCK_SALT * COULOMB * charge**2 / (18.0 * distance**4) * GPA_PER_EV_A3
