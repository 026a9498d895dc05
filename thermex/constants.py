"""Physical constants in house units (eV, Å, e, u, K, THz), one CODATA edition: the one of SciPy."""

from __future__ import annotations

import math

from scipy import constants as _si

#: Boltzmann constant, eV/K.
BOLTZMANN: float = _si.k / _si.e

#: Planck constant times 1 THz, eV: the energy of a quantum of ordinary frequency 1 THz.
PLANCK_THZ: float = _si.h * 1e12 / _si.e

#: Coulomb constant e²/(4πε₀), eV·Å.
COULOMB: float = _si.e / (4.0 * math.pi * _si.epsilon_0) * 1e10

#: 1 eV/Å³ in GPa.
GPA_PER_EV_A3: float = _si.e * 1e30 * 1e-9

#: Frequency in THz of a unit eigenvalue eV/(Å²·u): ν = THZ_PER_ROOT · √eigenvalue.
THZ_PER_ROOT: float = math.sqrt(_si.e / _si.atomic_mass) * 1e10 / (2.0 * math.pi) * 1e-12

#: 1 eV per primitive cell (or formula unit) in J/mol of the same.
J_PER_MOL_EV: float = _si.e * _si.N_A

#: ħ²/u in eV·Å², for mean square displacements.
HBAR2_PER_U: float = _si.hbar**2 / _si.atomic_mass / _si.e * 1e20

#: Speed in km/s of 1 THz·Å.
KM_PER_S_THZ_A: float = 0.1
