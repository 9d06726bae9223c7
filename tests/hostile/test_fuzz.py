"""A small, repeatable share of what fuzz_reader.py does for longer; and inputs that matter."""

from __future__ import annotations

import itertools

import pytest

from hostile.fuzz_reader import check, random_inputs


def test_mutated_netlists_end_in_a_circuit_or_a_problem() -> None:
    for content in itertools.islice(random_inputs(seed=1), 1500):
        try:
            check(content)
        except Exception as error:
            raise AssertionError(f"{content!r}: {error!r}") from error


@pytest.mark.parametrize(
    "content",
    [
        b"t\nR1 x 0 1\n.ic v(x)=''1",
        b"t\nR1 x 0 1 m=0",
        b"t\nR1 a 0 1e308 m=1e-308",
        b"t\n.model\n.subckt\n.param\n.ic\n.ac\n.func\n.if\n.temp\n.global\n.include\nX1\nK1\nB1\nE1",
        b"t\nE1 (a 0) POLY(1)\nE2 a 0 VALUE\nE3 a 0 TABLE\nV1 a 0 SIN()",
        b"t\nV2 a 0 PWL(0)\nR1 a 0 r=()",
    ],
)
def test_inputs_worth_keeping(content: bytes) -> None:
    check(content)
