"""One point of many: a prediction reduced to what a sweep keeps, or the reason that there is none."""

from __future__ import annotations

from collections.abc import Mapping
from concurrent.futures import Executor
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from thermex.anharmonic.method import was_interrupted
from thermex.case.case import Case
from thermex.errors import InputError, NoAnswerError
from thermex.expansion import predict
from thermex.exploration.executor import InProcess
from thermex.prediction import Prediction


@dataclass(frozen=True, slots=True)
class Point:
    """What one prediction gives; arrays over temperature as tuples, None where there is no value."""

    temperature_K: tuple[float, ...]
    alpha_linear_per_K: tuple[float | None, ...]
    """The best α computed: with the anharmonic correction where the case has one, else quasi-harmonic."""
    alpha_relative_error: tuple[float | None, ...]
    gruneisen: tuple[float | None, ...]
    bulk_modulus_T_GPa: tuple[float | None, ...]
    heat_capacity_P_J_per_mol_K: tuple[float | None, ...]
    lattice_A: Mapping[str, tuple[float | None, ...]]
    static_distance_A: float | None
    static_bulk_modulus_GPa: float | None
    valid_to_K: float | None
    reason: str
    """What ends the branch, or why there is no answer."""
    answered: bool
    kind: str
    """"quasi-harmonic", "leading order" or "sampled"."""

    def at(self, quantity: str, kelvin: float, axis: str = "a") -> float:
        """Return a quantity at one temperature, NaN where there is none."""
        rows: Any = self.lattice_A.get(axis, ()) if quantity == "lattice_A" else getattr(self, quantity)
        values = np.array([np.nan if v is None else v for v in rows], dtype=float)
        good = np.isfinite(values)
        grid = np.array(self.temperature_K)[good]
        if not good.any() or not grid[0] - 1e-9 <= kelvin <= grid[-1] + 1e-9:
            return float("nan")
        if good.sum() == 1:
            return float(values[good][0])
        from scipy.interpolate import PchipInterpolator

        return float(PchipInterpolator(grid, values[good])(kelvin))

    def as_dict(self) -> dict[str, Any]:
        """Return the point as plain data."""
        return asdict(self)


def point_of(content: Mapping[str, Any]) -> Point:
    """Rebuild a point from plain data."""

    def frozen(value: Any) -> Any:
        return tuple(value) if isinstance(value, list) else value

    fields = {k: frozen(v) for k, v in content.items()}
    fields["lattice_A"] = {k: tuple(v) for k, v in content["lattice_A"].items()}
    return Point(**fields)


def evaluate_alone(case: Case) -> Point:
    """Predict one of many cases inside a worker: nothing of it starts workers of its own."""
    return evaluate(case, InProcess())


def evaluate(case: Case, executor: Executor | None = None) -> Point:
    """Predict one case; an answer that does not exist becomes a point with its reason.

    Parameters
    ----------
    executor
        Runs the blocks of a sampled anharmonicity; two threads by default.

    Raises
    ------
    KeyboardInterrupt
        Interrupted, in a sampling too: one prediction keeps what was sampled, a point of many does not.
    """
    try:
        prediction = predict(case, executor=executor)
        if was_interrupted(prediction.anharmonic):
            raise KeyboardInterrupt
        return reduced(prediction)
    except (NoAnswerError, InputError) as error:
        temperature = tuple(case.conditions.temperatures)
        nothing = (None,) * len(temperature)
        return Point(
            temperature, nothing, nothing, nothing, nothing, nothing, {}, None, None, None, str(error), False, "none"
        )


def reduced(prediction: Prediction) -> Point:
    """Reduce a prediction to a point."""

    def plain(values: Any) -> tuple[float | None, ...]:
        return tuple(float(v) if np.isfinite(v) else None for v in values)

    corrected = prediction.anharmonic
    alpha, error = prediction.alpha_linear_per_K, prediction.alpha_relative_error
    lattice = dict(prediction.lattice_A)
    gamma, bulk = prediction.gruneisen, prediction.bulk_modulus_T_GPa
    heat = prediction.heat_capacity_P_J_per_mol_K
    if corrected is not None:
        there = np.isfinite(corrected.alpha_linear_per_K)
        alpha = np.where(there, corrected.alpha_linear_per_K, alpha)
        error = np.where(there, corrected.alpha_relative_error, error)
        gamma = np.where(there, corrected.gruneisen, gamma)
        bulk = np.where(there, corrected.bulk_modulus_T_GPa, bulk)
        heat = np.where(there, corrected.heat_capacity_P_J_per_mol_K, heat)
        lattice = {k: np.where(there, corrected.lattice_A[k], v) for k, v in lattice.items()}
    return Point(
        tuple(map(float, prediction.temperature_K)),
        plain(alpha),
        plain(error),
        plain(gamma),
        plain(bulk),
        plain(heat),
        {k: plain(v) for k, v in lattice.items()},
        prediction.static.nearest_distance_A,
        prediction.static.bulk_modulus_GPa,
        prediction.valid_to_K,
        prediction.valid_to_reason,
        True,
        corrected.kind if corrected is not None else "quasi-harmonic",
    )
