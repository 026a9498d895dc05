"""What one prediction holds: frozen arrays over temperature, each with its unit and its error."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from thermex.crystal.crystal import Crystal
from thermex.errors import InputError

if TYPE_CHECKING:
    from thermex.case.case import Case

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class StaticLattice:
    """The crystal at rest: no zero-point motion, no heat, at the pressure of the case."""

    crystal: Crystal
    """Relaxed at the pressure asked for."""
    energy_eV: float
    """Potential energy per primitive cell."""
    bulk_modulus_GPa: float
    """Static bulk modulus at this volume, inner coordinates relaxed."""
    bulk_modulus_derivative: float
    """dB/dP, dimensionless."""
    elastic_GPa: Array
    """Shape (6, 6): stiffness in Voigt order xx, yy, zz, yz, xz, xy, inner coordinates relaxed."""
    lowest_elastic_eigenvalue_GPa: float
    """Smallest eigenvalue of the stiffness (Born criterion: positive)."""
    nearest_distance_A: float
    """Distance of the nearest neighbours."""
    turning_points_A: Mapping[str, float]
    """Where a Buckingham-type pair turns over towards collapse, by pair; empty when none does."""

    @property
    def lattice_A(self) -> dict[str, float]:
        """Free lattice parameters by axis name."""
        names = self.crystal.axis_names
        return dict(zip(names, map(float, self.crystal.lattice_parameters), strict=True))


@dataclass(frozen=True, slots=True)
class EquationOfState:
    """An equation of state fitted to the static energy, for reporting only."""

    form: str
    """"Vinet" or "Birch–Murnaghan, third order"."""
    volume_A3: float
    bulk_modulus_GPa: float
    bulk_modulus_derivative: float
    rms_residual_eV: float


@dataclass(frozen=True, slots=True)
class NumericalError:
    """Relative error of α at every temperature, by source; shape (nT,) each."""

    mesh: Array
    volumes: Array
    supercell: Array
    sums: Array

    @property
    def total(self) -> Array:
        """Sum in quadrature."""
        total: Array = np.sqrt(self.mesh**2 + self.volumes**2 + self.supercell**2 + self.sums**2)
        return total


@dataclass(frozen=True, slots=True)
class Effort:
    """What was computed to reach the accuracy asked for."""

    mesh: tuple[int, int, int]
    """Graded mesh along the primitive reciprocal axes."""
    irreducible_q: int
    cells: int
    """Cells (volumes or shapes) at which phonons were computed."""
    supercell: tuple[int, int, int]
    """Primitive cells along each axis in the force constants given to phonopy."""
    strain_window: Array
    """Shape (d, 2): range of ln(lattice parameter / static one) that the cells span."""
    seconds: Mapping[str, float] = field(default_factory=dict)
    """Wall time by stage."""


@dataclass(frozen=True, slots=True)
class ModeSample:
    """Phonons on the mesh at one cell, for the density of states and the mode Grüneisen figure."""

    label: str
    """"cold" or "hot"."""
    temperature_K: float
    weights: Array
    """Shape (nq,), sum 1."""
    frequencies_THz: Array
    """Shape (nq, 3n)."""
    gruneisen: Array
    """Shape (nq, 3n): −d ln ν / d ln V along the path of thermal expansion."""


@dataclass(frozen=True, slots=True)
class ZoneCentre:
    """Response to fields and the optic modes at Γ of the static lattice; only with charges."""

    born_charges: Array
    """Shape (n, 3, 3), e: Born effective charge of each atom (the charge itself for a rigid ion)."""
    dielectric_high: Array
    """Shape (3, 3): ε∞, electronic (1 for rigid ions)."""
    dielectric_static: Array
    """Shape (3, 3): ε₀."""
    transverse_THz: Array
    """Shape (3n,): frequencies at Γ without a macroscopic field."""
    longitudinal_THz: Array
    """Shape (3n,): frequencies for q → 0 along z, with the field."""


@dataclass(frozen=True, slots=True)
class AnharmonicRule:
    """How wrong the quasi-harmonic α is expected to be: t = T_eff/T_end and the rule for it."""

    t: Array
    """Shape (nT,)."""
    overestimate: Array
    """Shape (nT,): expected relative overestimate of α."""
    low: Array
    """Lower edge of the scatter."""
    high: Array
    """Upper edge of the scatter."""
    end_K: float
    """T_end, the temperature at which the quasi-harmonic minimum disappears (inf if not reached)."""
    words: str
    """What the rule covers and what it does not."""


@dataclass(frozen=True, slots=True)
class Anharmonic:
    """The answer without the quasi-harmonic approximation; arrays (nT,), NaN where not given."""

    kind: str
    """"leading order" or "sampled"."""
    starts_K: float
    """Below this temperature no correction is printed (a quarter of the Debye temperature)."""
    extrapolated_from_K: float
    """Above this temperature the leading-order result is called extrapolated (t = 0.5)."""
    lattice_A: Mapping[str, Array]
    volume_A3: Array
    alpha_linear_per_K: Array
    alpha_volume_per_K: Array
    alpha_relative_error: Array
    gruneisen: Array
    bulk_modulus_T_GPa: Array
    heat_capacity_P_J_per_mol_K: Array
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Prediction:
    """Thermal expansion of one case over temperature.

    Arrays over temperature have shape (nT,) and hold NaN past ``valid_to_K`` (JSON and CSV show
    null). Volume and energies are per primitive cell, heat capacities per mole of formula units.
    """

    case: Case
    crystal: Crystal
    """The crystal at the static lattice; ``crystal.formula_units`` per primitive cell."""
    static: StaticLattice
    temperature_K: Array
    lattice_A: Mapping[str, Array]
    fractional: Array
    """Shape (nT, n, 3): positions in the primitive cell; inner coordinates follow the static forces."""
    volume_A3: Array
    alpha_volume_per_K: Array
    """Instantaneous volume coefficient (1/V)(dV/dT)_P."""
    alpha_axis_per_K: Mapping[str, Array]
    """Instantaneous linear coefficient of each free axis."""
    alpha_linear_per_K: Array
    """Instantaneous linear coefficient, polycrystal average = alpha_volume / 3."""
    alpha_relative_error: Array
    """Numerical error of α, relative (model and method errors are not in it)."""
    numerical_error: NumericalError
    gruneisen: Array
    """Thermodynamic γ = α_V B_T V / C_V."""
    gruneisen_mode_average: Array
    """Mean of the mode γ weighted by the heat capacity of each mode."""
    bulk_modulus_T_GPa: Array
    bulk_modulus_S_GPa: Array
    heat_capacity_V_J_per_mol_K: Array
    heat_capacity_P_J_per_mol_K: Array
    entropy_J_per_mol_K: Array
    free_energy_eV: Array
    """Helmholtz energy per primitive cell."""
    debye_temperature_K: Array
    """θ_D from the heat capacity at each T; the second-moment one is ``debye_moment_K``."""
    debye_moment_K: float
    mean_square_displacement_A2: Array
    """Shape (nT, n): ⟨u²⟩ of each atom (all three directions together)."""
    effective_temperature_K: Array
    """T_eff = E_vib / (number of modes · k_B): the temperature of the equivalent classical crystal."""
    reference_temperature_K: float
    """T₀ of the two conventions that need one."""
    elongation: Array
    """ΔL/L₀ from the reference temperature (volume-equivalent length V^(1/3) when axes differ)."""
    elongation_axis: Mapping[str, Array]
    alpha_mean_per_K: Array
    """Mean linear coefficient (L − L₀)/(L₀ (T − T₀)); the instantaneous one at T = T₀."""
    alpha_mean_axis_per_K: Mapping[str, Array]
    valid_to_K: float
    """End of the branch, or the highest temperature examined when the branch goes on (see reason)."""
    valid_to_reason: str
    branch_ends: bool
    """True when valid_to_K is the end of the branch, not only the end of the request."""
    branch_end_lattice_A: Mapping[str, float]
    """Lattice parameters at the branch end; empty when it was not reached."""
    zero_point_lattice_A: Mapping[str, float]
    """Lattice parameters at 0 K, zero-point motion included."""
    equations_of_state: tuple[EquationOfState, ...]
    effort: Effort
    modes: tuple[ModeSample, ...]
    zone_centre: ZoneCentre | None
    path_alpha_volume_per_K: Array | None
    """α_V with the axes locked to the static hydrostatic path, for comparison; None when cubic."""
    rule: AnharmonicRule | None
    anharmonic: Anharmonic | None
    notes: tuple[str, ...]
    """What the reader must know: warnings, conventions, what was left out; one sentence each."""

    def structure(self, temperature_K: float) -> Any:
        """Return the predicted primitive cell at one temperature as ASE Atoms.

        Raises
        ------
        InputError
            The temperature lies outside the range predicted.
        """
        from thermex.crystal.structure import to_atoms

        lengths = [self.at(self.lattice_A[name], temperature_K) for name in self.crystal.axis_names]
        if not np.isfinite(lengths).all():
            raise InputError(
                f"{temperature_K:g} K lies outside the prediction", where="structure", fix="ask within its range"
            )
        x = np.log(np.array(lengths) / self.crystal.lattice_parameters)
        good = np.isfinite(self.volume_A3)
        flat = self.fractional[good].reshape(int(good.sum()), -1)
        places = [float(np.interp(temperature_K, self.temperature_K[good], column)) for column in flat.T]
        cell = replace(self.crystal.strained(x), fractional=np.array(places).reshape(-1, 3))
        return to_atoms(cell)

    def at(self, values: Array, temperature_K: float) -> float:
        """Interpolate an array of this prediction at one temperature (cubic in T, NaN outside)."""
        from scipy.interpolate import PchipInterpolator

        good = np.isfinite(values)
        grid = self.temperature_K[good]
        if good.sum() < 2 or not grid[0] <= temperature_K <= grid[-1]:
            return float("nan")
        return float(PchipInterpolator(grid, values[good])(temperature_K))

    def __repr__(self) -> str:
        """Say in one line what was predicted."""
        from thermex.report.summary import summary_line

        return summary_line(self)

    def _repr_html_(self) -> str:
        """Show a notebook the heading, some rows and the range of validity."""
        from thermex.report.summary import summary_html

        return summary_html(self)
