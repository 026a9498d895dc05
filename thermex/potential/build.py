"""From the words of a case to a pair model on a crystal."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from thermex.case.case import PairSpec, PotentialSpec
from thermex.crystal.crystal import Crystal
from thermex.errors import InputError
from thermex.potential.forms import AMPLITUDE, make_form
from thermex.potential.lattice_sums import lattice_response
from thermex.potential.model import Interaction, Kind, PairModel, Spring
from thermex.potential.terms import Tapered, Term

Array = NDArray[np.float64]


def pair_model(spec: PotentialSpec, crystal: Crystal) -> PairModel:
    """Build the pair model of a case; amplitudes given by ``static_distance`` are solved.

    Parameters
    ----------
    crystal
        Gives the species present and, for ``static_distance``, the arrangement.

    Raises
    ------
    InputError
        A static distance that no amplitude can give.
    """
    open_pairs = [pair for pair in spec.pairs if pair.static_distance is not None]
    closed = tuple(pair for pair in spec.pairs if pair.static_distance is None)
    model = closed_model(replace(spec, pairs=closed), crystal.symbols)
    if len(open_pairs) > 1:
        raise InputError(
            f"static_distance stands in {len(open_pairs)} pairs",
            where="potential.pair",
            fix="one equilibrium condition gives one amplitude: keep it in one pair",
        )
    for pair in open_pairs:
        amplitude = static_amplitude(model, pair, crystal)
        solved = replace(pair, parameters={**pair.parameters, AMPLITUDE[pair.form]: amplitude})
        model = replace(model, interactions=(*model.interactions, *_interactions(solved, model.kinds)))
    return replace(model, description=tuple(_remarks(spec)))


def closed_model(spec: PotentialSpec, symbols: Sequence[str]) -> PairModel:
    """Build the pair model of a potential with every amplitude given, for the species present.

    Raises
    ------
    InputError
        An amplitude is given by ``static_distance``, which needs a crystal at rest.
    """
    kinds = _kinds(spec, symbols)
    known: list[Interaction] = []
    for pair in spec.pairs:
        if pair.static_distance is not None:
            raise InputError(
                f"{'-'.join(pair.between)} has a static_distance in place of its {AMPLITUDE[pair.form]}",
                where="potential.pair",
                fix="build the pair model on the crystal at rest first (thermex.potential.build.pair_model)",
            )
        known.extend(_interactions(pair, kinds))
    return PairModel(kinds, tuple(known), _springs(spec, kinds), tuple(_remarks(spec)))


def _kinds(spec: PotentialSpec, symbols: Sequence[str]) -> tuple[Kind, ...]:
    present = list(dict.fromkeys(symbols))
    kinds = []
    for symbol in present:
        shell = spec.polarisable[symbol].shell_charge if symbol in spec.polarisable else 0.0
        kinds.append(Kind(symbol, False, spec.charges.get(symbol, 0.0) - shell))
    for symbol in present:
        if symbol in spec.polarisable:
            kinds.append(Kind(symbol, True, spec.polarisable[symbol].shell_charge))
    return tuple(kinds)


def _springs(spec: PotentialSpec, kinds: tuple[Kind, ...]) -> tuple[Spring, ...]:
    out = []
    for symbol, ion in spec.polarisable.items():
        if any(k.symbol == symbol for k in kinds):
            core, shell = _index(kinds, symbol, "core"), _index(kinds, symbol, "shell")
            out.append(Spring(core, shell, ion.spring_constant, ion.quartic_constant))
    return tuple(out)


def _index(kinds: tuple[Kind, ...], symbol: str, centre: str) -> int:
    """Return the kind on which a short-ranged force acts: the shell where the ion has one."""
    core = next(i for i, k in enumerate(kinds) if k.symbol == symbol and not k.is_shell)
    if centre == "core":
        return core
    return next((i for i, k in enumerate(kinds) if k.symbol == symbol and k.is_shell), core)


def _interactions(pair: PairSpec, kinds: tuple[Kind, ...]) -> list[Interaction]:
    if not set(pair.between) <= {k.symbol for k in kinds}:
        return []
    ends = [_index(kinds, s, c) for s, c in zip(pair.between, pair.centres, strict=True)]
    low, high = sorted(ends)
    nearest = pair.reach == "nearest"
    return [Interaction(low, high, term, nearest) for term in _terms(pair)]


def _terms(pair: PairSpec) -> Iterable[Term]:
    terms = make_form(pair.form, pair.parameters, pair.file).terms()
    return (Tapered(terms, pair.cutoff),) if pair.cutoff is not None else terms


def static_amplitude(rest: PairModel, pair: PairSpec, crystal: Crystal) -> float:
    """Return the amplitude at which the nearest-neighbour distance of the static lattice is the one asked.

    U is linear in the amplitude, so dU/d ln V = 0 at that distance is one linear equation. A pair
    that carries its own attraction (Buckingham with C, Lennard-Jones, Mie, Morse) enters as a
    difference between two amplitudes.
    """
    name = AMPLITUDE[pair.form]
    scaled = _at_distance(crystal, float(pair.static_distance or 0.0))
    slopes = []
    for amplitude in (0.0, 1.0):
        trial = replace(pair, parameters={**pair.parameters, name: amplitude})
        model = replace(rest, interactions=(*rest.interactions, *_interactions(trial, rest.kinds)))
        response = lattice_response(model, model.particles(scaled))
        slopes.append(float(response.gradient[:3].sum()))
    per_unit = slopes[1] - slopes[0]
    amplitude = -slopes[0] / per_unit if per_unit else float("nan")
    if not np.isfinite(amplitude) or amplitude <= 0.0 or abs(slopes[0]) < 1e-12 * abs(per_unit):
        raise InputError(
            f"no positive {name} holds the static lattice at {pair.static_distance} Å",
            where=f"potential.pair {'-'.join(pair.between)}: static_distance",
            fix=f"give {name} itself, or a pair with an attraction to balance",
        )
    return amplitude


def _at_distance(crystal: Crystal, distance: float) -> Crystal:
    """Scale a crystal uniformly so that its nearest-neighbour distance is the one given."""
    scale = np.log(distance / nearest_distance(crystal))
    return crystal.strained(np.full(len(crystal.axes), scale))


def nearest_distance(crystal: Crystal) -> float:
    """Return the shortest distance between two atoms of a crystal, Å."""
    from thermex.potential.bonds import find_bonds

    reach = 1.8 * (crystal.volume / crystal.size) ** (1.0 / 3.0)
    return float(find_bonds(crystal.lattice, crystal.cartesian, reach).length.min())


def _remarks(spec: PotentialSpec) -> Iterable[str]:
    for pair in spec.pairs:
        name = "–".join(pair.between)
        if pair.cutoff is not None:
            yield (
                f"{name}: cut at {pair.cutoff} Å as the potential is defined, switched off smoothly from "
                f"{0.9 * pair.cutoff:.2f} Å so that energy, force and force constant stay continuous."
            )
        if pair.reach == "nearest":
            yield f"{name}: acts between nearest neighbours alone, as the potential is defined."
        if pair.form == "tabulated":
            yield f"{name}: quintic spline through the table, switched off over its last tenth."
