"""Random active RC networks as netlists, and their transfer functions in exact arithmetic.

The exact side shares nothing with the program: determinants of polynomials with rational
coefficients, expanded by rows. Units: kΩ, mS, nF, µs, so that every value is an integer.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction

from hypothesis import strategies as st

Polynomial = tuple[Fraction, ...]
"""Coefficients from the constant term up."""
Pair = tuple[str, str]


@dataclass(frozen=True, slots=True)
class RandomNetwork:
    """Driven at ``in``, read at its last node."""

    nodes: tuple[str, ...]
    resistors: tuple[tuple[Pair, int], ...]
    sources: tuple[tuple[Pair, Pair, int], ...]
    """Output pair, control pair, transconductance."""
    capacitors: tuple[tuple[Pair, int], ...]

    @property
    def output(self) -> str:
        return self.nodes[-1]

    @property
    def text(self) -> str:
        """The netlist, as a user would write it."""
        lines = ["random active network", "Vs in 0 AC 1"]
        for i, ((a, b), kilohm) in enumerate(self.resistors):
            lines.append(f"R{i} {a} {b} {kilohm}k")
        for i, ((a, b), (c, d), millisiemens) in enumerate(self.sources):
            lines.append(f"G{i} {a} {b} {c} {d} {millisiemens}m")
        for i, ((a, b), nanofarad) in enumerate(self.capacitors):
            lines.append(f"C{i} {a} {b} {nanofarad}n")
        return "\n".join([*lines, ".end", ""])

    def denominator(self) -> Polynomial:
        """det(G + sC) of the node equations, ``in`` held by the source."""
        return _determinant([row[:-1] for row in self._equations()])

    def numerator(self) -> Polynomial:
        """Cramer's rule for the output node."""
        equations = self._equations()
        column = self.nodes.index(self.output)
        replaced = [[*row[:column], row[-1], *row[column + 1 : -1]] for row in equations]
        return _determinant(replaced)

    def _equations(self) -> list[list[Polynomial]]:
        """Node equations with the right-hand side as the last column."""
        zero: Polynomial = (Fraction(0),)
        column = {node: k for k, node in enumerate((*self.nodes, "in"))}
        rows = [[zero] * len(column) for _ in self.nodes]
        for (a, b), (c, d), value in self._stamps():
            for node, out_sign in ((a, 1), (b, -1)):
                for control, sign in ((c, 1), (d, -1)):
                    if node in self.nodes and control in column:
                        row, k = rows[column[node]], column[control]
                        row[k] = _add(row[k], tuple(out_sign * sign * x for x in value))
        return [[*row[:-1], tuple(-x for x in row[-1])] for row in rows]

    def _stamps(self) -> Iterator[tuple[Pair, Pair, Polynomial]]:
        for pair, kilohm in self.resistors:
            yield pair, pair, (Fraction(1, kilohm),)
        for output, control, millisiemens in self.sources:
            yield output, control, (Fraction(millisiemens),)
        for pair, nanofarad in self.capacitors:
            yield pair, pair, (Fraction(0), Fraction(nanofarad))


def coefficient(polynomial: Polynomial, power: int) -> Fraction:
    return polynomial[power] if power < len(polynomial) else Fraction(0)


@st.composite
def active_networks(
    draw: st.DrawFn, *, capacitors_in_forest: bool = False, least_capacitors: int = 2
) -> RandomNetwork:
    """Two to four nodes, each with a resistive path; up to three controlled sources.

    ``capacitors_in_forest`` keeps loops of capacitors and the source out, so that the number of
    poles is the number of capacitors unless a cutset takes one away.
    """
    nodes = tuple(f"n{i + 1}" for i in range(draw(st.integers(2, 4))))
    everywhere = ("0", "in", *nodes)
    resistors = [(("in", nodes[0]), draw(st.integers(1, 20)))]
    for i, node in enumerate(nodes):
        other = draw(st.sampled_from(("0", *nodes[:i])))
        resistors.append(((node, other), draw(st.integers(1, 20))))
    pairs = [(a, b) for i, a in enumerate(everywhere) for b in everywhere[i + 1 :]]
    pair = st.sampled_from(pairs)
    free = [p for p in pairs if p != ("0", "in")]
    resistors += draw(st.lists(st.tuples(st.sampled_from(free), st.integers(1, 20)), max_size=2))
    sources = draw(st.lists(st.tuples(st.sampled_from(free), pair, st.integers(1, 30)), max_size=3))
    chosen = draw(
        st.lists(st.sampled_from(free), min_size=least_capacitors, max_size=4, unique=True)
    )
    if capacitors_in_forest:
        chosen = _forest(chosen)
    capacitors = tuple((p, draw(st.integers(1, 50))) for p in chosen)
    return RandomNetwork(nodes, tuple(resistors), tuple(sources), capacitors)


def _forest(pairs: Sequence[Pair]) -> list[Pair]:
    """The pairs that close no loop with those before them; ``in`` and ground are tied."""
    group = {"in": "0"}

    def root(node: str) -> str:
        while node in group:
            node = group[node]
        return node

    kept = []
    for a, b in pairs:
        root_a, root_b = root(a), root(b)
        if root_a != root_b:
            group[root_a] = root_b
            kept.append((a, b))
    return kept


def _determinant(rows: Sequence[Sequence[Polynomial]]) -> Polynomial:
    """By expansion along the first row; at most four rows here."""
    if not rows:
        return (Fraction(1),)
    total: Polynomial = (Fraction(0),)
    for k, entry in enumerate(rows[0]):
        minor = _determinant([[*row[:k], *row[k + 1 :]] for row in rows[1:]])
        total = _add(total, tuple((-1) ** k * x for x in _multiply(entry, minor)))
    return total


def _add(p: Polynomial, q: Polynomial) -> Polynomial:
    size = max(len(p), len(q))
    return tuple(coefficient(p, k) + coefficient(q, k) for k in range(size))


def _multiply(p: Polynomial, q: Polynomial) -> Polynomial:
    product = [Fraction(0)] * (len(p) + len(q) - 1)
    for i, x in enumerate(p):
        for j, y in enumerate(q):
            product[i + j] += x * y
    return tuple(product)
