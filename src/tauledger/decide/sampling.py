"""Drawing boards: a Latin hypercube that can be entered at any board, and distributions.

Every quantity's range is cut into as many strata as there are boards, and each board takes one
stratum of each quantity. The order of the strata is a permutation keyed by seed and name, not a
shuffled list: a board's draw can be computed alone, so memory does not grow with the number of
boards and any split of the work gives the same boards. Adding a part leaves the draws of the
others as they were.

Sources: M. D. McKay, R. J. Beckman, W. J. Conover, Technometrics 21 (1979) 239-245 (sampling);
M. Luby, C. Rackoff, SIAM J. Computing 17 (1988) 373-386 (permutation from rounds of a hash);
M. J. Wichura, Applied Statistics 37 (1988) 477-484, algorithm AS 241 (normal quantile); all from
memory, the quantile checked against Python's statistics module.
"""

from __future__ import annotations

import hashlib
import math

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
Words = NDArray[np.uint64]

DISTRIBUTIONS = ("uniform", "normal", "truncated")
SIGMAS = 3.0
"""A tolerance is this many standard deviations of the normal (common practice, no source)."""
_TAIL = 0.0013498980316300933
"""Φ(−3)."""
_DENSITY = math.exp(-0.5 * SIGMAS**2) / math.sqrt(2.0 * math.pi)
"""φ(3)."""
_ROUNDS = 6


def latin_hypercube(name: str, seed: int, boards: int, start: int, stop: int) -> FloatArray:
    """(stop − start,): the draws in (0, 1) of the boards from ``start`` to ``stop``."""
    digest = hashlib.blake2b(f"{seed}:{name}".encode(), digest_size=16).digest()
    key = np.frombuffer(digest, dtype="<u8").astype(np.uint64)
    index = np.arange(start, stop, dtype=np.uint64)
    stratum = _permuted(index, boards, int(key[0])).astype(float)
    place = (_mixed(index ^ key[1]) >> np.uint64(11)).astype(float) * 2.0**-53
    inside: FloatArray = np.clip((stratum + place) / boards, 1e-16, 1.0 - 1e-16)
    return inside


def _permuted(index: Words, size: int, key: int) -> Words:
    """Where each index goes in a permutation of 0 … size − 1.

    A Feistel network permutes the next power of four; who lands outside goes round again.
    """
    half = max(1, ((size - 1).bit_length() + 1) // 2)
    found = _feistel(index, half, key)
    while (outside := found >= size).any():
        found[outside] = _feistel(found[outside], half, key)
    return found


def _feistel(index: Words, half: int, key: int) -> Words:
    shift, mask = np.uint64(half), np.uint64((1 << half) - 1)
    left, right = index >> shift, index & mask
    for turn in range(_ROUNDS):
        salt = np.uint64((key + turn * 0x9E3779B97F4A7C15) & 0xFFFFFFFFFFFFFFFF)
        left, right = right, left ^ (_mixed(right ^ salt) & mask)
    return (left << shift) | right


def _mixed(words: Words) -> Words:
    """A hash of 64 bits (the finaliser of the splitmix64 generator, from memory)."""
    with np.errstate(over="ignore"):
        z = words + np.uint64(0x9E3779B97F4A7C15)
        z = (z ^ (z >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
        z = (z ^ (z >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    return z ^ (z >> np.uint64(31))


def deviations(draws: FloatArray, low: float, high: float, distribution: str) -> FloatArray:
    """Deviations within a window from draws in (0, 1).

    ``uniform`` between the ends; ``normal`` with each end three standard deviations from the
    nominal value (from the middle, when zero is not inside the window), the two sides each with
    their own; ``truncated`` the same, cut off at the ends.
    """
    if distribution == "uniform":
        return low + draws * (high - low)
    inside = draws if distribution == "normal" else _TAIL + draws * (1.0 - 2.0 * _TAIL)
    z = normal_quantile(inside) / SIGMAS
    centre = 0.0 if low < 0.0 < high else (low + high) / 2.0
    return centre + np.where(z > 0.0, z * (high - centre), z * (centre - low))


def standard_deviation(low: float, high: float, distribution: str) -> float:
    """Of one deviation, exactly, lopsided windows included."""
    if distribution == "uniform":
        return (high - low) / math.sqrt(12.0)
    centre = 0.0 if low < 0.0 < high else (low + high) / 2.0
    below, above = (centre - low) / SIGMAS, (high - centre) / SIGMAS
    # The mean is (above − below)·E|z|/2, the mean square (below² + above²)·E[z²]/2.
    square, size = _MOMENTS[distribution]
    mean = (above - below) * size / 2.0
    return math.sqrt((below**2 + above**2) * square / 2.0 - mean**2)


_MOMENTS = {
    "normal": (1.0, math.sqrt(2.0 / math.pi)),
    "truncated": (
        1.0 - 2.0 * SIGMAS * _DENSITY / (1.0 - 2.0 * _TAIL),
        2.0 * (1.0 / math.sqrt(2.0 * math.pi) - _DENSITY) / (1.0 - 2.0 * _TAIL),
    ),
}
"""E[z²] and E|z| of a standard normal, and of one cut off at ±3."""


_CENTRE = (
    (2509.0809287301226727, 33430.575583588128105, 67265.770927008700853, 45921.953931549871457,
     13731.693765509461125, 1971.5909503065514427, 133.14166789178437745, 3.387132872796366608),
    (5226.495278852854561, 28729.085735721942674, 39307.89580009271061, 21213.794301586595867,
     5394.1960214247511077, 687.1870074920579083, 42.313330701600911252, 1.0),
)  # fmt: skip
_MIDDLE = (
    (7.7454501427834140764e-4, 0.0227238449892691845833, 0.24178072517745061177,
     1.27045825245236838258, 3.64784832476320460504, 5.7694972214606914055,
     4.6303378461565452959, 1.42343711074968357734),
    (1.05075007164441684324e-9, 5.475938084995344946e-4, 0.0151986665636164571966,
     0.14810397642748007459, 0.68976733498510000455, 1.6763848301838038494,
     2.05319162663775882187, 1.0),
)  # fmt: skip
_FAR = (
    (2.01033439929228813265e-7, 2.71155556874348757815e-5, 0.0012426609473880784386,
     0.026532189526576123093, 0.29656057182850489123, 1.7848265399172913358,
     5.4637849111641143699, 6.6579046435011037772),
    (2.04426310338993978564e-15, 1.4215117583164458887e-7, 1.8463183175100546818e-5,
     7.868691311456132591e-4, 0.0148753612908506148525, 0.13692988092273580531,
     0.59983220655588793769, 1.0),
)  # fmt: skip


def normal_quantile(probability: FloatArray) -> FloatArray:
    """z with Φ(z) = probability, for probabilities inside (0, 1); relative error about 1e-16."""
    q = probability - 0.5
    r = np.sqrt(-np.log(np.minimum(probability, 1.0 - probability)))
    tail = np.where(r <= 5.0, _ratio(_MIDDLE, r - 1.6), _ratio(_FAR, r - 5.0))
    centre = q * _ratio(_CENTRE, 0.180625 - q * q)
    return np.asarray(np.where(np.abs(q) <= 0.425, centre, np.copysign(tail, q)))


def _ratio(coefficients: tuple[tuple[float, ...], tuple[float, ...]], x: FloatArray) -> FloatArray:
    above, below = (np.zeros_like(x), np.zeros_like(x))
    for first, second in zip(*coefficients, strict=True):
        above, below = above * x + first, below * x + second
    return above / below
