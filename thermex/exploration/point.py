"""One point of many: a prediction reduced to what a sweep keeps, or the reason that there is none."""

from __future__ import annotations

from collections.abc import Mapping
from concurrent.futures import Executor
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from thermex.anharmonic.method import was_interrupted
from thermex.case.case import Case
from thermex.comparison.modelled import modelled
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
    log_length: Mapping[str, tuple[float | None, ...]]
    """ln L by axis ("" for V^{1/3}), without a step where the correction begins."""
    static_distance_A: float | None
    static_bulk_modulus_GPa: float | None
    valid_to_K: float | None
    valid_to_reason: str
    """What ends the branch, or why there is no answer."""
    answered: bool
    kind: str
    """"quasi-harmonic", "leading order" or "sampled"."""
    starts_K: float | None
    """From here on values are corrected; None without a correction."""
    tested_to_K: float | None
    """Above this temperature values are extrapolated; None where there is no such limit."""

    def extrapolated(self, kelvin: float) -> bool:
        """Whether a temperature lies past the range in which the method was tested."""
        return self.tested_to_K is not None and kelvin > self.tested_to_K

    def at(self, quantity: str, kelvin: float, axis: str = "a") -> float:
        """Return a quantity at one temperature, NaN where there is none."""
        by_axis = quantity in {"lattice_A", "log_length"}
        rows: Any = getattr(self, quantity).get(axis, ()) if by_axis else getattr(self, quantity)
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
    for name in ("lattice_A", "log_length"):
        fields[name] = {k: tuple(v) for k, v in content[name].items()}
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
        return _unanswered(tuple(case.conditions.temperatures), str(error))


def _unanswered(temperature: tuple[float, ...], reason: str) -> Point:
    nothing = (None,) * len(temperature)
    return Point(
        temperature_K=temperature,
        alpha_linear_per_K=nothing,
        alpha_relative_error=nothing,
        gruneisen=nothing,
        bulk_modulus_T_GPa=nothing,
        heat_capacity_P_J_per_mol_K=nothing,
        lattice_A={},
        log_length={},
        static_distance_A=None,
        static_bulk_modulus_GPa=None,
        valid_to_K=None,
        valid_to_reason=reason,
        answered=False,
        kind="none",
        starts_K=None,
        tested_to_K=None,
    )


def reduced(prediction: Prediction) -> Point:
    """Reduce a prediction to a point."""

    def plain(values: Any) -> tuple[float | None, ...]:
        return tuple(float(v) if np.isfinite(v) else None for v in values)

    m = modelled(prediction)
    return Point(
        temperature_K=tuple(map(float, prediction.temperature_K)),
        alpha_linear_per_K=plain(m.alpha),
        alpha_relative_error=plain(m.relative_error),
        gruneisen=plain(m.gruneisen),
        bulk_modulus_T_GPa=plain(m.bulk_modulus),
        heat_capacity_P_J_per_mol_K=plain(m.heat_pressure),
        lattice_A={k: plain(v) for k, v in m.lattice.items()},
        log_length={k: plain(v) for k, v in m.log_length.items()},
        static_distance_A=prediction.static.nearest_distance_A,
        static_bulk_modulus_GPa=prediction.static.bulk_modulus_GPa,
        valid_to_K=prediction.valid_to_K,
        valid_to_reason=prediction.valid_to_reason,
        answered=True,
        kind=m.kind,
        starts_K=m.starts_K if np.isfinite(m.starts_K) else None,
        tested_to_K=m.tested_to_K if np.isfinite(m.tested_to_K) else None,
    )
