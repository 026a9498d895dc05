"""Memory: what a prediction will need, and whether the machine has it."""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path

import numpy as np

from thermex.crystal.crystal import Crystal
from thermex.errors import ResourceError
from thermex.lattice import MOST
from thermex.mesh import divisions_for, graded
from thermex.potential.lattice_sums import direct_range
from thermex.potential.model import PairModel
from thermex.tour import meshes_for

#: Interpreter and libraries, bytes.
BASE = 1.2e8

#: Bytes that one bond takes in a lattice sum, all its products included (measured on an 80-atom cell).
PER_BOND = 700.0

#: Matrices (nq, 3m, 3m) held at the same time when modes are analysed.
COPIES = 8.0

#: Doubles held for every pair of a centre of the home cell and a centre of the supercell.
PER_PAIR = 60.0


def expected_bytes(model: PairModel, crystal: Crystal, accuracy: float) -> float:
    """Return the peak memory that a prediction is expected to need, good to a factor of about two."""
    particles = model.particles(crystal)
    m = particles.size
    neighbours = 4.0 / 3.0 * np.pi * direct_range(model, particles) ** 3 * m / crystal.volume
    finest = meshes_for(crystal, accuracy)[-1]
    points = len(graded(crystal, divisions_for(crystal, finest)).points)
    matrices = COPIES * 1.5 * points * (3.0 * m) ** 2 * 16.0
    supercell = PER_PAIR * m * min(max(8.0 * m, 400.0), max(MOST, 8.0 * m)) * 8.0
    return float(BASE + PER_BOND * m * neighbours + matrices + supercell)


def available_bytes() -> float:
    """Return the memory that this process may still take: of the machine, its container and its limits."""
    return min(_limits(), default=float("inf"))


def refuse_oversized(model: PairModel, crystal: Crystal, accuracy: float, where: str) -> None:
    """Raise :class:`ResourceError` when a prediction would not fit into memory."""
    needed, there = expected_bytes(model, crystal, accuracy), available_bytes()
    if needed > there:
        raise ResourceError(
            f"a cell of {crystal.size} atoms needs about {needed / 1e9:.1f} GB of memory, "
            f"and {there / 1e9:.1f} GB are free",
            where=f"{where}: crystal" if where else "crystal",
            fix="take a smaller cell, or a machine with more memory",
        )


def _limits() -> Iterator[float]:
    """Yield every limit that can be read here; systems differ in what they tell."""
    for line in _text("/proc/meminfo").splitlines():
        if line.startswith("MemAvailable:"):
            yield 1024.0 * float(line.split()[1])
    group = _text("/sys/fs/cgroup/memory.max").strip()
    used = _text("/sys/fs/cgroup/memory.current").strip()
    if group.isdigit() and used.isdigit():
        yield float(group) - float(used)
    try:
        yield float(os.sysconf("SC_PAGE_SIZE")) * float(os.sysconf("SC_PHYS_PAGES"))
        import resource

        for kind in (resource.RLIMIT_AS, resource.RLIMIT_DATA):
            soft, _ = resource.getrlimit(kind)
            if soft != resource.RLIM_INFINITY:
                yield float(soft)
    except (ImportError, OSError, ValueError, AttributeError):
        return


def _text(path: str) -> str:
    try:
        return Path(path).read_text(encoding="utf-8")
    except (OSError, ValueError):
        return ""
