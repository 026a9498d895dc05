"""The Ewald method for any inverse power: Σ c_ij r⁻ⁿ split into a real and a reciprocal part.

With Q the regularised upper incomplete gamma function and E_p the generalised exponential integral,

    r⁻ⁿ = r⁻ⁿ Q(n/2, η²r²)  +  (1/V) Σ_G g(G) e^{iG·r},   g(k) = π^{3/2} η^{n−3}/Γ(n/2) · E_{(n−1)/2}(k²/4η²)

which is the Coulomb sum for n = 1 (there G = 0 drops out by neutrality).

References
----------
P. P. Ewald, Ann. Phys. 369, 253 (1921), doi:10.1002/andp.19213690304;
B. R. A. Nijboer and F. W. de Wette, Physica 23, 309 (1957), doi:10.1016/S0031-8914(57)92124-9.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import factorial, gamma, pi, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy import special

Array = NDArray[np.float64]

#: η·r and G/2η at which both sums are stopped: exp(−36) = 2·10⁻¹⁶.
SPAN = 6.0

#: Largest order of E_p that is reached by recurrence for every x.
RECURRENT = 8.0


def split_parameter(volume: float, particles: int) -> float:
    """Return η (1/Å) that balances the two sums and scales with the cell."""
    return float(sqrt(pi) * particles ** (1.0 / 6.0) / volume ** (1.0 / 3.0))


@dataclass(frozen=True, slots=True)
class RealPart:
    """c r⁻ⁿ Q(n/2, η²r²), the short-ranged half, as an elementary term."""

    coefficient: float
    exponent: float
    eta: float

    def derivatives(self, r: Array, order: int) -> Array:
        """Return the function and its derivatives up to ``order`` ≤ 4.

        With E = 2ηⁿ e^{−η²r²}/Γ(n/2): r φ′ = −n φ − E, and its derivatives in turn.
        """
        n, eta = self.exponent, self.eta
        e = np.empty((order + 1, *r.shape))
        e[0] = 2.0 * eta**n * np.exp(-((eta * r) ** 2)) / gamma(n / 2.0)
        for k in range(order):
            e[k + 1] = -2.0 * eta**2 * (r * e[k] + (k * e[k - 1] if k else 0.0))
        out = np.empty((order + 1, *r.shape))
        out[0] = r**-n * special.gammaincc(n / 2.0, (eta * r) ** 2)
        for k in range(order):
            out[k + 1] = -((n + k) * out[k] + e[k]) / r
        return self.coefficient * out

    def reach(self) -> float:
        """Distance at which the real sum stops."""
        return SPAN / self.eta


def smooth_part(n: float, eta: float, r: Array) -> tuple[Array, Array, Array]:
    """Return ψ, ψ′/r and (ψ″ − ψ′/r)/r² of ψ = r⁻ⁿ P(n/2, η²r²), which is finite at r = 0.

    This is what the reciprocal sum holds of a pair; it is taken off again where a pair must not
    interact (a core and its own shell).
    """
    y = (eta * np.asarray(r, dtype=float)) ** 2
    if not y.size:
        return y, y, y
    value, first, second = np.zeros_like(y), np.zeros_like(y), np.zeros_like(y)
    # ψ = ηⁿ/Γ(n/2) Σ_k (−y)^k / (k! (k + n/2)): converges fast for the small distances met here
    for k in range(60):
        c = (-1.0) ** k / (factorial(k) * (k + n / 2.0))
        value += c * y**k
        if k >= 1:
            first += c * 2.0 * k * y ** (k - 1)
        if k >= 2:
            second += c * 4.0 * k * (k - 1) * y ** (k - 2)
    scale = eta**n / gamma(n / 2.0)
    return scale * value, scale * eta**2 * first, scale * eta**4 * second


def exponential_integral(p: float, x: Array) -> Array:
    """Return E_p(x) = ∫₁^∞ t⁻ᵖ e^{−xt} dt for real p ≥ 0 and x ≥ 0 (DLMF 8.19)."""
    x = np.maximum(np.asarray(x, dtype=float), 1e-280)
    if p == 0.0:
        return np.asarray(np.exp(-x) / x)
    small = np.full(x.shape, True) if p <= RECURRENT else x < 1.0
    out = np.empty_like(x)
    out[small] = _by_recurrence(p, x[small])
    out[~small] = _by_fraction(p, x[~small])
    return out


def _by_recurrence(p: float, x: Array) -> Array:
    """E_{p+1} = (e^{−x} − x E_p)/p upward from 0 < p₀ ≤ 1 (DLMF 8.19.12).

    Each step multiplies the relative error by about x/p, which matters only where e^{−x} has made the
    function negligible.
    """
    steps = int(np.ceil(p)) - 1
    start = p - steps
    if start == 1.0:
        value = special.exp1(x)
    elif start == 0.5:
        value = sqrt(pi) * special.erfc(np.sqrt(x)) / np.sqrt(x)
    else:
        value = special.gammaincc(1.0 - start, x) * gamma(1.0 - start) * x ** (start - 1.0)
    for k in range(steps):
        value = (np.exp(-x) - x * value) / (start + k)
    return np.asarray(value)


def _by_fraction(p: float, x: Array) -> Array:
    """Continued fraction DLMF 8.19.17 in its even form, by the modified Lentz method."""
    b = x + p
    c = np.full_like(x, 1e300)
    d = 1.0 / b
    h = d.copy()
    for k in range(1, 200):
        a = -k * (p + k - 1.0)
        b = b + 2.0
        d = 1.0 / (a * d + b)
        c = b + a / c
        step = c * d
        h = h * step
        if x.size == 0 or np.max(np.abs(step - 1.0)) < 1e-15:
            break
    return np.asarray(h * np.exp(-x))


def kernel(n: float, eta: float, squared: Array) -> tuple[Array, Array, Array]:
    """Return g(k) and its first two derivatives with respect to k² (for strains).

    Uses dE_p/dx = −E_{p−1}; for n = 1 the closed form 4π e^{−k²/4η²}/k².
    """
    x = squared / (4.0 * eta**2)
    scale = 1.0 / (4.0 * eta**2)
    if n == 1.0:
        g = 4.0 * pi * np.exp(-x) / squared
        first = -g * (scale + 1.0 / squared)
        second = g * ((scale + 1.0 / squared) ** 2 + 1.0 / squared**2)
        return g, first, second
    p = (n - 1.0) / 2.0
    front = pi**1.5 * eta ** (n - 3.0) / gamma(n / 2.0)
    value = exponential_integral(p, x)
    lower = _lower(p - 1.0, x)
    lowest = _lower(p - 2.0, x)
    return front * value, -front * scale * lower, front * scale**2 * lowest


def kernel_value(n: float, eta: float, squared: Array) -> Array:
    """Return g(k) alone, from k²."""
    x = squared / (4.0 * eta**2)
    if n == 1.0:
        return np.asarray(4.0 * pi * np.exp(-x) / squared)
    front = pi**1.5 * eta ** (n - 3.0) / gamma(n / 2.0)
    return np.asarray(front * exponential_integral((n - 1.0) / 2.0, x))


def _lower(p: float, x: Array) -> Array:
    """E_p for p that may be negative, by E_{p} = (e^{−x} − p E_{p+1})/x from p + 1 ≥ 0."""
    if p >= 0.0:
        return exponential_integral(p, x)
    x = np.maximum(x, 1e-280)
    return np.asarray((np.exp(-x) - p * _lower(p + 1.0, x)) / x)


def at_zero(n: float, eta: float) -> float:
    """Return g(0) = 2π^{3/2} η^{n−3}/((n − 3)Γ(n/2)), for n > 3."""
    return float(pi**1.5 * eta ** (n - 3.0) / gamma(n / 2.0) * 2.0 / (n - 3.0))


def self_energy(n: float, eta: float) -> float:
    """Return lim_{r→0} r⁻ⁿ P(n/2, η²r²) = ηⁿ/Γ(n/2 + 1)."""
    return float(eta**n / gamma(n / 2.0 + 1.0))


def reciprocal_vectors(lattice: Array, eta: float, margin: float = 0.0) -> Array:
    """Return all G with |G| < 2·SPAN·η + margin, shape (nG, 3), 1/Å; G = 0 is included.

    Parameters
    ----------
    margin
        Length of the longest wave vector to be added to them, 1/Å (with the factor 2π).
    """
    basis = 2.0 * pi * np.linalg.inv(lattice).T
    cutoff = 2.0 * SPAN * eta + margin
    reach = np.ceil(cutoff * np.linalg.norm(lattice, axis=1) / (2.0 * pi)).astype(int)
    ranges = [np.arange(-n, n + 1) for n in reach]
    grid = np.stack(np.meshgrid(*ranges, indexing="ij"), axis=-1).reshape(-1, 3)
    vectors = grid @ basis
    chosen: Array = vectors[np.einsum("gk,gk->g", vectors, vectors) < cutoff**2]
    return chosen
