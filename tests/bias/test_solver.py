"""The bias solver on circuits whose answer is known, in batches, and on impossible ones."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from tauledger.bias import newton, solve_bias
from tauledger.circuit import flatten
from tauledger.circuit.elements import Circuit
from tauledger.netlist import parse
from tauledger.problems import ProblemError

STAGE = """one transistor
VCC vcc 0 12
R1 vcc b 47k
R2 b 0 10k
RC vcc c 4.7k
RE e 0 1k
Q1 c b e qx
.model qx npn bf=200 vaf=100 rb=50 is=1e-14
.end
"""
# Without limiting Newton overflows here, and plain Newton from zero oscillates between the two
# collectors; the loop has a third, unstable solution in the middle.
LATCH = """two stable states
VCC vcc 0 5
R1 vcc c1 1k
R2 vcc c2 1k
RB1 c1 b2 10k
RB2 c2 b1 10k
Q1 c1 b1 0 qx
Q2 c2 b2 0 qx
.model qx npn bf=100
{nodeset}
.end
"""


def circuit(text: str) -> Circuit:
    return flatten(parse(text))


def test_divider_and_controlled_sources() -> None:
    point = solve_bias(
        circuit(
            """linear
V1 a 0 10
R1 a b 1k
R2 b 0 3k
E1 c 0 a b 4
R3 c 0 1k
G1 0 d b 0 2m
R4 d 0 500
H1 f 0 V1 2k
R5 f 0 1k
F1 0 g V1 3
R6 g 0 100
B1 h 0 V=v(a)*v(b)/10
R7 h 0 1k
.end
"""
        )
    ).point
    expected = {"b": 7.5, "c": 10.0, "d": 7.5, "f": -5.0, "g": -0.75, "h": 7.5}
    assert {node: point.voltage(node) for node in expected} == pytest.approx(expected)


def test_each_board_of_a_batch_is_the_board_solved_alone() -> None:
    rng = np.random.default_rng(7)
    boards = 40
    variations = {
        "r1": 47e3 * rng.uniform(0.8, 1.2, boards),
        "rc": 4.7e3 * rng.uniform(0.5, 3.0, boards),
        "q1.bf": rng.uniform(20, 800, boards),
        "vcc": rng.uniform(2, 30, boards),
    }
    together = solve_bias(circuit(STAGE), variations).point
    for board in range(boards):
        alone = solve_bias(
            circuit(STAGE), {name: value[board : board + 1] for name, value in variations.items()}
        ).point
        assert together.voltages[board] == pytest.approx(alone.voltages[0], rel=1e-9, abs=1e-9)
        assert together.devices["Q1"].values["gm"][board] == pytest.approx(
            alone.devices["Q1"].values["gm"][0], rel=1e-8
        )


def test_a_board_without_a_solution_is_counted_and_leaves_the_others_alone() -> None:
    broken = solve_bias(
        circuit(STAGE), {"r1": np.array([47e3, np.nan, 47e3]), "rc": np.array([1e3, 1e3, 4.7e3])}
    ).point
    assert broken.failed_boards == 1
    assert np.isnan(broken.voltages[1]).all()
    sound = solve_bias(circuit(STAGE)).point
    assert broken.voltages[2] == pytest.approx(sound.voltages[0], rel=1e-12)


@pytest.mark.parametrize(("held", "low", "high"), [("c1", "c1", "c2"), ("c2", "c2", "c1")])
def test_nodeset_chooses_the_state_of_a_latch(held: str, low: str, high: str) -> None:
    point = solve_bias(circuit(LATCH.format(nodeset=f".nodeset v({held})=0.1"))).point
    assert point.voltage(low) < 0.3
    assert point.voltage(high) > 4.0


@pytest.mark.parametrize(
    ("body", "code", "named", "line"),
    [
        ("V1 a 0 5\nV2 a 0 6\nR1 a 0 1k", "voltage-loop", ["V1 (line 2)", "V2 (line 3)"], 3),
        ("V1 a 0 5\nL1 a b 1m\nR1 b 0 1k\nL2 b 0 1u", "voltage-loop", ["V1", "L1", "L2"], 5),
        ("V1 a 0 5\nR1 a 0 1k\nE1 b 0 a 0 2\nL1 b 0 1m", "voltage-loop", ["E1", "L1"], 5),
        ("V1 a 0 5\nR1 a 0 1k\nL1 b b 1m\nR2 b 0 1", "voltage-loop", ["L1 (line 4)"], 4),
        ("V1 a 0 5\nR1 a 0 1k\nG1 0 b a 0 1m\nC1 b 0 1n", "current-cutset", ["G1", "'b'"], 4),
        ("V1 a 0 5\nC1 a b 1n\nI1 b 0 1m\nR1 b c 1k", "current-cutset", ["I1", "'b'"], 4),
        ("V1 a 0 5\nR1 a 0 1k\nC1 a b 1n\nC2 b 0 1n", "node-floating", ["C1", "'b'"], 4),
        ("V1 a 0 5\nR1 a 0 1k\nR2 b 0 1k\nG1 b 0 0 b 1m", "node-undetermined", ["b", "R2"], 4),
    ],
)
def test_impossible_circuits_name_what_is_at_fault(
    body: str, code: str, named: list[str], line: int
) -> None:
    with pytest.raises(ProblemError) as caught:
        solve_bias(circuit(f"impossible\n{body}\n.end\n"))
    problem = caught.value.problems[0]
    assert problem.code == code
    assert [name for name in named if name not in problem.message] == []
    assert problem.span is not None
    assert problem.span.line == line
    assert problem.advice


def test_no_solution_names_the_devices_that_moved_most() -> None:
    """The current of B1 rises faster than R1 takes it away: no voltage of a satisfies both."""
    with pytest.raises(ProblemError) as caught:
        solve_bias(
            circuit(
                """no solution
VCC vcc 0 12
R1 a 0 10k
B1 0 a I=1m*(v(a)^2+1)
Q1 a x 0 qx
RX x 0 1k
R2 vcc c 1k
R3 c 0 1k
Q2 vcc c 0 qx
.model qx npn
.end
"""
            )
        )
    [problem] = caught.value.problems
    assert problem.code == "bias-not-found"
    assert "Q1 (line 5)" in problem.message
    assert problem.span is not None
    assert problem.span.line == 5


def ladder(stages: int) -> str:
    """Direct-coupled followers in a row, three unknowns each."""
    lines = ["ladder", "VCC vcc 0 15", "RS vcc b0 10k"]
    for i in range(stages):
        kind = "qn" if i % 2 else "qp"
        rail, other = ("vcc", "0") if i % 2 else ("0", "vcc")
        lines += [f"Q{i} {rail} b{i} e{i} {kind}", f"RE{i} e{i} {other} 4.7k"]
        lines += [f"RB{i} e{i} b{i + 1} 1k"]
    lines += [f"RL b{stages} 0 1meg", ".model qn npn rb=50", ".model qp pnp rb=50", ".end"]
    return "\n".join(lines)


def test_sparse_and_dense_solutions_agree(monkeypatch: pytest.MonkeyPatch) -> None:
    text = ladder(60)
    dense = solve_bias(circuit(text)).point
    monkeypatch.setattr(newton, "SPARSE_ABOVE", 100)
    assert len(dense.nodes) > 100
    sparse = solve_bias(circuit(text)).point
    assert sparse.voltages == pytest.approx(dense.voltages, rel=1e-9, abs=1e-9)


def test_a_singular_matrix_is_found_by_the_sparse_solver_too(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(newton, "SPARSE_ABOVE", 1)
    with pytest.raises(ProblemError, match="loop of voltage sources"):
        solve_bias(circuit("loop\nV1 a 0 5\nV2 a 0 6\nR1 a 0 1k\n.end\n"))


def test_a_small_circuit_loads_no_sparse_solver() -> None:
    script = (
        "import sys; from tauledger.bias import solve_bias; from tauledger.circuit import flatten;"
        "from tauledger.netlist import parse; solve_bias(flatten(parse(sys.stdin.read())));"
        "print([name for name in sys.modules if name.partition('.')[0] == 'scipy'])"
    )
    done = subprocess.run(
        [sys.executable, "-c", script], input=STAGE, capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "[]"


def test_a_report_loads_no_scipy_matplotlib_or_pyspice(tmp_path: Path) -> None:
    netlist = tmp_path / "stage.cir"
    netlist.write_text(STAGE.replace("R1 vcc", "VIN in 0 AC 1\nC1 in b 1u\nR1 vcc"))
    script = (
        "import sys; from tauledger.command import main; status = main();"
        "heavy = {'scipy', 'matplotlib', 'PySpice'} & {n.partition('.')[0] for n in sys.modules};"
        "sys.exit(f'loaded {heavy}' if heavy else status)"
    )
    command = [sys.executable, "-c", script, "report", str(netlist), "--output", "c"]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (0, "")
