"""The case: what the user asked for, checked and frozen, every default spelled out."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path


@dataclass(frozen=True, slots=True)
class CrystalSpec:
    """What sits where."""

    prototype: str | None
    """Name of a structure type ("rock salt"), or None with ``file`` or ``atoms``."""
    sites: tuple[str, ...]
    """What sits on the sites of the prototype, in its order."""
    lattice: Mapping[str, float] = field(default_factory=dict)
    """Start values of a, b, c, Å; may be empty."""
    inner: Mapping[str, float] = field(default_factory=dict)
    """Start values of free inner coordinates."""
    file: Path | None = None
    """Structure file that ASE reads."""
    masses: Mapping[str, float] = field(default_factory=dict)
    """u, by symbol; only those the user gave."""
    atoms: object | None = None
    """ASE Atoms, from the Python face."""


@dataclass(frozen=True, slots=True)
class PairSpec:
    """One short-ranged term between two species."""

    between: tuple[str, str]
    form: str
    parameters: Mapping[str, float]
    static_distance: float | None = None
    """Å, nearest neighbours of the static lattice, in place of the amplitude."""
    cutoff: float | None = None
    """Å, only where the published potential is defined with one."""
    reach: str = "all"
    """"all", or "nearest" for a potential defined between nearest neighbours alone."""
    file: Path | None = None
    """Table of a tabulated form."""
    centres: tuple[str, str] = ("shell", "shell")
    """Which centres the force joins; "shell" means the core where an ion has no shell."""


@dataclass(frozen=True, slots=True)
class Polarisable:
    """A shell on an ion."""

    shell_charge: float
    """e."""
    spring_constant: float
    """k₂, eV/Å²."""
    quartic_constant: float = 0.0
    """k₄, eV/Å⁴."""


@dataclass(frozen=True, slots=True)
class PotentialSpec:
    """The potential."""

    charges: Mapping[str, float]
    """Total charge of each ion (core and shell), e."""
    pairs: tuple[PairSpec, ...]
    polarisable: Mapping[str, Polarisable] = field(default_factory=dict)
    published: str | None = None
    """Name of the shipped set it was taken from."""
    citation: str = ""
    provenance: str = ""
    covariance: tuple[tuple[str, ...], tuple[tuple[float, ...], ...]] | None = None
    calculator: str | None = None
    """Name of an ASE calculator that thermex constructs, in place of pairs."""
    """Parameter names and their covariance matrix."""


@dataclass(frozen=True, slots=True)
class Conditions:
    """Temperatures and pressure."""

    temperatures: tuple[float, ...]
    """K, ascending, ≥ 0."""
    pressure: float = 0.0
    """GPa."""
    reference_temperature: float = 293.15
    """K, T₀ of ΔL/L₀ and of the mean coefficient."""


@dataclass(frozen=True, slots=True)
class Accuracy:
    """How exact the answer has to be."""

    alpha: float = 1e-3
    """Relative numerical error of α at T ≥ 100 K."""
    anharmonic: str = "default"
    """"default", "none", "leading order" or "sampled"."""
    sampled_error: float = 0.02
    seed: int = 20261


@dataclass(frozen=True, slots=True)
class MeasuredSpec:
    """Where the measured values are."""

    material: str | None = None
    file: Path | None = None


@dataclass(frozen=True, slots=True)
class Case:
    """A crystal, a potential and the conditions: all that a prediction needs."""

    title: str
    crystal: CrystalSpec
    potential: PotentialSpec
    conditions: Conditions
    accuracy: Accuracy = field(default_factory=Accuracy)
    measured: MeasuredSpec | None = None
    source: str = ""
    """File name as the user gave it; "" from Python."""
