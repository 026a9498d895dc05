"""Invented predictions for the tests of the report: no number here was computed or measured.

A Debye–Grüneisen crystal with made-up constants stands in for a result, so that every array has
the right shape and a plausible size. Nothing in here may be shown as a property of a material.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import trapezoid

from thermex.case.case import Accuracy, Case, Conditions, CrystalSpec, MeasuredSpec, PairSpec, PotentialSpec
from thermex.crystal.crystal import Crystal
from thermex.prediction import (
    Anharmonic,
    AnharmonicRule,
    Effort,
    EquationOfState,
    ModeSample,
    NumericalError,
    Prediction,
    StaticLattice,
    ZoneCentre,
)
from thermex.report.beside import Beside, Column, Curve

Array = NDArray[np.float64]
GAS = 8.314462618
END = 1900.0


def invented_crystal() -> Crystal:
    """Two kinds of atom on a rock-salt lattice, a = 4.2 Å."""
    half = 2.1
    lattice = half * np.array([[0.0, 1, 1], [1, 0, 1], [1, 1, 0]])
    return Crystal(
        lattice=lattice,
        fractional=np.array([[0.0, 0, 0], [0.5, 0.5, 0.5]]),
        symbols=("Mg", "O"),
        masses=np.array([24.305, 15.999]),
        conventional=np.array([[-1, 1, 1], [1, -1, 1], [1, 1, -1]]),
        axes=((0, 1, 2),),
        axis_names=("a",),
        rotations=np.eye(3, dtype=int)[None],
        translations=np.zeros((1, 3)),
        space_group=225,
        formula="MgO",
        formula_units=1,
        displacements=np.zeros((0, 2, 3)),
        name="rock salt",
    )


def invented_case(title: str, temperatures: tuple[float, ...]) -> Case:
    """A case with two pairs."""
    pairs = (
        _pair(("Mg", "O"), "Born-Mayer", {"A": 1400.0, "rho": 0.3}),
        _pair(("O", "O"), "Buckingham", {"A": 20000.0, "rho": 0.15, "C": 25.0}),
    )
    potential = PotentialSpec(
        charges={"Mg": 2.0, "O": -2.0},
        pairs=pairs,
        polarisable={},
        published=None,
        citation="",
        provenance="",
        covariance=None,
    )
    crystal = CrystalSpec(prototype="rock salt", sites=("Mg", "O"), lattice={"a": 4.2}, inner={}, file=None, masses={})
    return Case(
        title=title,
        crystal=crystal,
        potential=potential,
        conditions=Conditions(temperatures=temperatures, pressure=0.0),
        accuracy=Accuracy(),
        measured=MeasuredSpec(material="MgO", file=None),
        source="invented.toml",
    )


def _pair(between: tuple[str, str], form: str, parameters: dict[str, float]) -> PairSpec:
    return PairSpec(
        between=between,
        form=form,
        parameters=parameters,
        static_distance=None,
        cutoff=None,
        reach="all",
        file=None,
        centres=("shell", "shell"),
    )


def _debye(reduced: Array) -> Array:
    """Debye heat capacity over 3R of one atom against T/θ, by quadrature."""
    out = np.zeros_like(reduced)
    for index, value in enumerate(reduced):
        if value > 0.0:
            x = np.linspace(1e-6, 1.0 / value, 2000)
            body = x**4 * np.exp(x - 2.0 * np.log(np.expm1(x)))
            out[index] = 3.0 * value**3 * trapezoid(body, x)
    return out


def invented_prediction(
    title: str = "Invented crystal", temperatures: tuple[float, ...] = tuple(np.arange(0.0, 2001.0, 50.0))
) -> Prediction:
    """Return a cubic prediction whose branch ends at 1900 K (NaN above)."""
    kelvin = np.array(temperatures)
    heat = 6.0 * GAS * _debye(kelvin / 750.0)
    past = kelvin > END
    run_away = np.where(past, np.nan, np.sqrt(END / np.clip(END - kelvin + 15.0, 1.0, None)))
    alpha = heat / (6.0 * GAS) * 1.1e-5 * run_away**0.6
    length = 4.2 * (1.001 + _integral(kelvin, alpha))
    linear = np.interp(293.15, kelvin, length) if kelvin.size > 1 else length[0]
    mean = _mean(kelvin, length, float(linear), alpha)
    bulk = np.where(past, np.nan, 165.0 - 0.03 * kelvin)
    gamma = np.where(past, np.nan, 1.55 + 1e-4 * kelvin)
    thermal = 3.0 * alpha * gamma * kelvin
    crystal = invented_crystal()
    error = np.where(past, np.nan, 2e-4 + 0.1 * np.exp(-kelvin / 15.0))
    zero = np.zeros_like(kelvin)
    return Prediction(
        case=invented_case(title, tuple(float(t) for t in kelvin)),
        crystal=crystal,
        static=_static(crystal),
        temperature_K=kelvin,
        lattice_A={"a": length},
        fractional=np.repeat(np.array([[[0.0, 0, 0], [0.5, 0.5, 0.5]]]), len(kelvin), axis=0),
        volume_A3=length**3 / 4.0,
        alpha_volume_per_K=3.0 * alpha,
        alpha_axis_per_K={"a": alpha},
        alpha_linear_per_K=alpha,
        alpha_relative_error=error,
        numerical_error=NumericalError(mesh=error, volumes=zero, supercell=zero, sums=zero),
        gruneisen=gamma,
        gruneisen_mode_average=gamma,
        bulk_modulus_T_GPa=bulk,
        bulk_modulus_S_GPa=bulk * (1.0 + thermal),
        heat_capacity_V_J_per_mol_K=np.where(past, np.nan, heat),
        heat_capacity_P_J_per_mol_K=heat * (1.0 + thermal),
        entropy_J_per_mol_K=np.where(past, np.nan, 0.1 * kelvin),
        free_energy_eV=np.where(past, np.nan, -41.0 - 1e-4 * kelvin),
        debye_temperature_K=np.where(past, np.nan, 750.0 + zero),
        debye_moment_K=760.0,
        mean_square_displacement_A2=np.where(past, np.nan, 0.003 + 1e-5 * kelvin)[:, None] * np.ones((1, 2)),
        effective_temperature_K=np.sqrt(kelvin**2 + 280.0**2),
        reference_temperature_K=293.15,
        elongation=length / linear - 1.0,
        elongation_axis={"a": length / linear - 1.0},
        alpha_mean_per_K=mean,
        alpha_mean_axis_per_K={"a": mean},
        valid_to_K=END,
        valid_to_reason="the isothermal bulk modulus falls to zero",
        branch_ends=True,
        branch_end_lattice_A={"a": 4.31},
        zero_point_lattice_A={"a": 4.2042},
        equations_of_state=(EquationOfState("Vinet", 18.522, 165.0, 4.2, 1e-5),),
        effort=Effort((16, 16, 16), 408, 9, (4, 4, 4), np.array([[-0.002, 0.03]]), {"phonons": 0.5}),
        modes=(_modes("cold", 0.0, 1.0), _modes("hot", END, 0.9)),
        zone_centre=_zone_centre(),
        path_alpha_volume_per_K=None,
        rule=_rule(kelvin, past),
        anharmonic=None,
        notes=("Invented note: no number in this result was computed.",),
    )


def _integral(kelvin: Array, alpha: Array) -> Array:
    filled = np.where(np.isfinite(alpha), alpha, 0.0)
    steps = 0.5 * (filled[1:] + filled[:-1]) * np.diff(kelvin)
    total = np.concatenate([[0.0], np.cumsum(steps)])
    return np.where(np.isfinite(alpha), total, np.nan)


def _mean(kelvin: Array, length: Array, reference: float, alpha: Array) -> Array:
    gap = kelvin - 293.15
    with np.errstate(divide="ignore", invalid="ignore"):
        mean = (length - reference) / (reference * gap)
    return np.where(np.abs(gap) < 1e-9, alpha, mean)


def _static(crystal: Crystal) -> StaticLattice:
    return StaticLattice(
        crystal=crystal,
        energy_eV=-41.0,
        bulk_modulus_GPa=168.0,
        bulk_modulus_derivative=4.2,
        elastic_GPa=np.diag([280.0, 280, 280, 140, 140, 140]),
        lowest_elastic_eigenvalue_GPa=120.0,
        nearest_distance_A=2.1,
        turning_points_A={"O-O": 0.6},
    )


def _modes(label: str, kelvin: float, scale: float) -> ModeSample:
    random = np.random.default_rng(4)
    frequencies = scale * np.sort(random.gamma(4.0, 3.5, size=(60, 6)), axis=1)
    return ModeSample(
        label=label,
        temperature_K=kelvin,
        weights=np.full(60, 1.0 / 60.0),
        frequencies_THz=frequencies,
        gruneisen=1.5 + 0.3 * random.standard_normal((60, 6)),
    )


def _zone_centre() -> ZoneCentre:
    return ZoneCentre(
        born_charges=np.array([2.0 * np.eye(3), -2.0 * np.eye(3)]),
        dielectric_high=np.eye(3),
        dielectric_static=3.1 * np.eye(3),
        transverse_THz=np.array([0.0, 0, 0, 12, 12, 12]),
        longitudinal_THz=np.array([0.0, 0, 0, 12, 12, 22]),
    )


def _rule(kelvin: Array, past: Array) -> AnharmonicRule:
    t = np.where(past, np.nan, np.sqrt(kelvin**2 + 280.0**2) / (END + 40.0))
    over = 0.22 * t / (1.0 - np.clip(t, None, 0.99)) ** 0.8
    return AnharmonicRule(
        t=t, overestimate=over, low=over * 0.8, high=over * 1.25, end_K=END, words="Invented rule in words."
    )


def with_anharmonic(prediction: Prediction) -> Prediction:
    """Return the same prediction with an invented leading-order correction between 190 K and the end."""
    kelvin = prediction.temperature_K
    shown = (kelvin >= 190.0) & np.isfinite(prediction.alpha_linear_per_K)
    factor = np.where(shown, 1.0 - 1.2e-4 * kelvin, np.nan)
    return replace(
        prediction,
        anharmonic=Anharmonic(
            kind="leading order",
            starts_K=190.0,
            extrapolated_from_K=950.0,
            lattice_A={"a": prediction.lattice_A["a"] * (factor * 0.0 + 1.0)},
            volume_A3=prediction.volume_A3,
            alpha_linear_per_K=prediction.alpha_linear_per_K * factor,
            alpha_volume_per_K=prediction.alpha_volume_per_K * factor,
            alpha_relative_error=np.where(shown, 1e-3, np.nan),
            gruneisen=prediction.gruneisen,
            bulk_modulus_T_GPa=prediction.bulk_modulus_T_GPa,
            heat_capacity_P_J_per_mol_K=prediction.heat_capacity_P_J_per_mol_K,
            notes=("Invented correction.",),
        ),
    )


def axial_prediction(title: str = "Invented axial crystal") -> Prediction:
    """Return an invented prediction with two free axes, a and c."""
    cubic = invented_prediction(title)
    crystal = replace(
        cubic.crystal,
        axes=((0, 1), (2,)),
        axis_names=("a", "c"),
        formula="TiO2",
        formula_units=2,
        name="rutile",
    )
    alpha = cubic.alpha_linear_per_K
    return replace(
        cubic,
        crystal=crystal,
        static=replace(cubic.static, crystal=crystal),
        lattice_A={"a": cubic.lattice_A["a"], "c": 0.64 * cubic.lattice_A["a"]},
        alpha_axis_per_K={"a": 0.9 * alpha, "c": 1.2 * alpha},
        elongation_axis={"a": 0.9 * cubic.elongation, "c": 1.2 * cubic.elongation},
        alpha_mean_axis_per_K={"a": 0.9 * cubic.alpha_mean_per_K, "c": 1.2 * cubic.alpha_mean_per_K},
        branch_end_lattice_A={"a": 4.31, "c": 2.75},
        zero_point_lattice_A={"a": 4.2042, "c": 2.69},
        path_alpha_volume_per_K=2.97 * alpha,
        effort=replace(cubic.effort, strain_window=np.array([[-0.002, 0.03], [-0.003, 0.04]])),
    )


def measured_beside(prediction: Prediction) -> Beside:
    """Return invented measured values beside a prediction: two sources, two columns, four curves."""
    kelvin = prediction.temperature_K
    points = {100.0: 2.1e-6, 300.0: 10.4e-6, 500.0: 12.8e-6, 1000.0: 14.9e-6}
    alpha = np.array([points.get(float(t), np.nan) for t in kelvin])
    gamma = np.where(kelvin == 300.0, 1.54, np.nan)
    dense = np.linspace(20.0, 1500.0, 150)
    room = np.array([300.0])
    curves = (
        _curve("alpha_linear_per_K", np.array([*points]), np.array([*points.values()]), 1),
        _curve("alpha_linear_per_K", dense, 1.6e-5 * dense / (dense + 150.0), 2),
        _curve("gruneisen", room, np.array([1.54]), 2),
        _curve("bulk_modulus_S_GPa", room, np.array([163.0]), 1),
    )
    return Beside(
        sources=("Invented series one, from memory", "Invented series <two>"),
        columns={
            "alpha_linear_per_K": Column(alpha, tuple(int(np.isfinite(v)) for v in alpha)),
            "gruneisen": Column(gamma, tuple(2 * int(np.isfinite(v)) for v in gamma)),
        },
        curves=curves,
    )


def _curve(quantity: str, kelvin: Array, value: Array, source: int) -> Curve:
    return Curve(quantity, "", kelvin, value, 0.02 * value if source == 1 else np.full(len(value), np.nan), source)
