"""Two revisions of an amplifier: what differs, and which edit moved which corner."""

from __future__ import annotations

import random
import re
from pathlib import Path

import pytest

from tauledger.analysis import Analysis, analyze, analyze_circuit
from tauledger.netlist import parse
from tauledger.quantity import parse_number
from tauledger.review.changes import Attribution, Comparison, PartChange
from tauledger.review.edits import apply, find_edits
from tauledger.review.matching import match
from tauledger.revisions import compare

SAMPLES = Path(__file__).parents[2] / "samples"
COMMON_EMITTER = (SAMPLES / "common-emitter/common-emitter.cir").read_text()
FEEDBACK_PAIR = (SAMPLES / "feedback-pair/feedback-pair.cir").read_text()
PHONO_STAGE = (SAMPLES / "phono-stage/phono-stage.cir").read_text()


def _edited(netlist: str, *edits: tuple[str, str]) -> str:
    """The netlist with one line replaced by each edit; the line is named by its beginning."""
    for start, line in edits:
        netlist, count = re.subn(rf"^{start}\b.*$", line, netlist, count=1, flags=re.M)
        assert count == 1
    return netlist


def _analysed(netlist: str) -> Analysis:
    return analyze(parse(netlist, "amp.cir"))


def _compared(old: str, new: str) -> Comparison:
    return compare(_analysed(old), _analysed(new))


def _change(comparison: Comparison, name: str) -> PartChange:
    (row,) = [row for row in comparison.parts if name in (row.old_name, row.new_name)]
    return row


def _moved(comparison: Comparison, figure: str) -> Attribution:
    (row,) = [row for row in comparison.attributions if row.figure == figure]
    return row


def _shares(attribution: Attribution) -> dict[str, float]:
    return {effect.edit: effect.share or 0.0 for effect in attribution.effects}


def test_a_smaller_bypass_capacitor_is_what_moved_the_low_corner() -> None:
    new = _edited(
        COMMON_EMITTER,
        ("CE", "CE emit 0 22u"),
        ("C2", "C2 coll out 1.2u"),
        ("RC", "RC vcc coll 4k"),
    )
    comparison = _compared(COMMON_EMITTER, new)
    assert {row.new_name for row in comparison.parts} == {"CE", "C2", "RC"}
    (value,) = _change(comparison, "CE").details
    assert (value.old, value.new, value.unit) == (pytest.approx(100e-6), pytest.approx(22e-6), "F")
    low = _moved(comparison, "low corner")
    shares = _shares(low)
    assert shares["CE"] > 0.95
    assert abs(shares["C2"]) + abs(shares["RC"]) < 0.05
    assert low.effects[0].edit == "CE"
    assert abs(low.remainder) < 0.01 * (low.new - low.old)
    # The gain is not CE's affair: at midband it is a short before and after.
    assert _shares(_moved(comparison, "midband gain"))["RC"] > 0.95


def test_edits_that_act_together_leave_an_interaction() -> None:
    """The coupling capacitor sees RL: halved both, the corner moves four times as far."""
    old = """two edits
V1 in 0 AC 1
C1 in a 1u
R1 a 0 10k
C9 a 0 10p
R9 in 0 1Meg
.print ac v(a)
"""
    new = _edited(old, ("C1", "C1 in a 0.5u"), ("R1", "R1 a 0 5k"))
    low = _moved(_compared(old, new), "low corner")
    corner = 1 / (2 * 3.141592653589793 * 1e-6 * 10e3)
    assert low.old == pytest.approx(corner, rel=1e-3)
    assert low.new == pytest.approx(4 * corner, rel=1e-3)
    for effect in low.effects:
        # Alone from one to two corners, last from two to four.
        assert effect.alone == pytest.approx(corner, rel=1e-3)
        assert effect.last == pytest.approx(2 * corner, rel=1e-3)
        assert effect.share == pytest.approx(0.5, rel=1e-3)
    assert low.interaction == pytest.approx(corner, rel=2e-3)
    assert abs(low.remainder) < 1e-3 * corner


def test_three_factors_leave_a_remainder() -> None:
    """1/RC with R, C and a second C in parallel edited: means no longer add up by themselves."""
    old = "three\nV1 in 0 AC 1\nC1 in a 1u\nR1 a b 5k\nR2 b 0 5k\nR9 in 0 1Meg\n.print ac v(a)\n"
    new = _edited(old, ("C1", "C1 in a 0.1u"), ("R1", "R1 a b 1k"), ("R2", "R2 b 0 1k"))
    low = _moved(_compared(old, new), "low corner")
    total = sum(effect.average or 0.0 for effect in low.effects)
    assert low.remainder == pytest.approx(low.new - low.old - total)
    assert abs(low.remainder) > 0.05 * (low.new - low.old)


def test_lines_moved_comments_and_spelling_are_no_change() -> None:
    lines = COMMON_EMITTER.splitlines()
    start = lines.index(".ac dec 20 1 100Meg")
    parts = [line for line in lines[1:start] if re.match(r"[A-Z]\w* ", line) and line[0] != "*"]
    model = lines[lines.index(next(line for line in lines if line.startswith(".model"))) : start]
    new = [lines[0], *(line.lower() for line in reversed(parts)), "* another remark", *model]
    new = [line.replace("3.9k", "3k9").replace("2.2u", "2200n") for line in new]
    comparison = _compared(COMMON_EMITTER, "\n".join([*new, *lines[start:]]))
    assert not comparison.electrical
    assert comparison.parts == ()
    assert comparison.attributions == ()
    assert not any(row.changed for row in comparison.words)


def _scrambled(netlist: str, seed: int) -> str:
    """Every designator and net under another name, every part on another line."""
    chance = random.Random(seed)
    terminals = {"R": 2, "C": 2, "L": 2, "V": 2, "Q": 3, "J": 3}
    lines = netlist.splitlines()
    parts = [line.split() for line in lines[1:] if line[:1] in terminals]
    nets = sorted({net for part in parts for net in part[1 : 1 + terminals[part[0][0]]]} - {"0"})
    # Old names are used again for other nets and parts, which is the hard case.
    names = dict(zip(nets, chance.sample(nets, len(nets)), strict=True)) | {"0": "0"}
    numbers = chance.sample(range(1, 100), len(parts))
    rewritten = []
    for part, number in zip(parts, numbers, strict=True):
        count = terminals[part[0][0]]
        mapped = [names[net] for net in part[1 : 1 + count]]
        rewritten.append(" ".join([f"{part[0][0]}{number}", *mapped, *part[1 + count :]]))
    chance.shuffle(rewritten)
    rest = [line for line in lines[1:] if line[:1] not in terminals]
    rest = [line.replace("v(out)", f"v({names['out']})") for line in rest]
    return "\n".join([lines[0], *rewritten, *rest]) + "\n"


@pytest.mark.parametrize("netlist", [COMMON_EMITTER, FEEDBACK_PAIR, PHONO_STAGE])
@pytest.mark.parametrize("seed", range(3))
def test_a_netlist_numbered_afresh_is_no_change(netlist: str, seed: int) -> None:
    comparison = _compared(netlist, _scrambled(netlist, seed))
    assert not comparison.electrical
    assert {row.kind for row in comparison.parts} == {"renamed"}
    assert not any(row.changed for row in comparison.words)


@pytest.mark.parametrize("seed", range(3))
def test_an_edit_is_found_in_a_netlist_numbered_afresh(seed: int) -> None:
    new = _scrambled(_edited(FEEDBACK_PAIR, ("CE2", "CE2 e2 0 47u")), seed)
    comparison = _compared(FEEDBACK_PAIR, new)
    edited = [row for row in comparison.parts if row.electrical]
    assert [(row.kind, row.old_name) for row in edited] == [("changed", "CE2")]
    assert _moved(comparison, "low corner").effects[0].share == pytest.approx(1.0)


def test_two_capacitors_that_swap_numbers_are_renamed() -> None:
    swapped = re.sub(r"^(C1|C2)\b", lambda m: {"C1": "C2", "C2": "C1"}[m[1]], COMMON_EMITTER,
                     flags=re.M)  # fmt: skip
    comparison = _compared(COMMON_EMITTER, swapped)
    assert [(row.kind, row.old_name, row.new_name) for row in comparison.parts] == [
        ("renamed", "C1", "C2"),
        ("renamed", "C2", "C1"),
    ]
    assert not comparison.electrical


def test_a_renumbered_capacitor_of_another_value_is_one_change() -> None:
    comparison = _compared(COMMON_EMITTER, _edited(COMMON_EMITTER, ("CE", "C7 emit 0 47u")))
    (row,) = comparison.parts
    assert (row.kind, row.old_name, row.new_name) == ("changed", "CE", "C7")
    assert _moved(comparison, "low corner").effects[0].parts == ("C7",)


def test_an_added_part_splits_a_net() -> None:
    """A resistor put in series with the emitter: RE1 keeps its net, CE now bypasses RE only."""
    new = _edited(COMMON_EMITTER, ("RE", "RE e2 0 1k\nRG emit e2 47"), ("CE", "CE e2 0 100u"))
    comparison = _compared(COMMON_EMITTER, new)
    added = _change(comparison, "RG")
    assert (added.kind, added.old_name, added.new_span and added.new_span.line) == ("added", "", 18)
    assert _change(comparison, "CE").details[0].what == "nodes"
    # The three only make sense together: the net e2 is in none of the others.
    (gain,) = _moved(comparison, "midband gain").effects
    assert set(gain.parts) == {"RG", "RE", "CE"}
    assert gain.share == pytest.approx(1.0)


def test_a_removed_bypass_takes_the_corner_and_the_gain_with_it() -> None:
    new = _edited(COMMON_EMITTER, ("CE", "* no bypass"), ("C1", "C1 base src 1u"))
    comparison = _compared(COMMON_EMITTER, new)
    assert _change(comparison, "CE").kind == "removed"
    assert _change(comparison, "CE").old_span is not None
    assert _shares(_moved(comparison, "midband gain"))["CE"] == pytest.approx(1.0, abs=0.01)
    (low,) = [row for row in comparison.words if row.what == "low corner set by"]
    assert (low.old, low.changed) == ("CE", True)


def test_a_model_card_is_one_edit_for_all_its_transistors() -> None:
    new = FEEDBACK_PAIR.replace("BF=220", "BF=320").replace(
        "Q1  c1  b1  e1 NLOW", "Q1 c1 b1 e1 NGEN"
    )
    old = FEEDBACK_PAIR.replace("Q1  c1  b1  e1 NLOW", "Q1 c1 b1 e1 NGEN")
    comparison = _compared(old, new)
    assert {row.new_name for row in comparison.parts} == {"Q1", "Q2"}
    assert comparison.parts[0].details[0].what == "model BF"
    (effect,) = _moved(comparison, "midband gain").effects
    assert effect.parts == ("Q1", "Q2")


def test_a_turned_electrolytic_is_told_though_the_equations_stay() -> None:
    comparison = _compared(COMMON_EMITTER, _edited(COMMON_EMITTER, ("CE", "CE 0 emit 100u")))
    (row,) = comparison.parts
    assert (row.kind, row.electrical, row.details[0].what) == (
        "changed",
        False,
        "terminals (polarity)",
    )
    assert not comparison.electrical


def test_a_role_that_changes_is_told() -> None:
    """C2 moved from the output to across collector and base is feedback, not coupling."""
    old = _edited(COMMON_EMITTER, ("RL", "RL out 0 10k\nC9 coll 0 1p"))
    comparison = _compared(old, _edited(old, ("C9", "C9 coll base 1p")))
    roles = {row.part: (row.old, row.new) for row in comparison.words if row.what == "role"}
    assert set(roles) == {"C9"}
    assert roles["C9"][0] != roles["C9"][1]


def test_another_output_is_said_and_nothing_is_attributed() -> None:
    new = COMMON_EMITTER.replace("v(out)", "v(coll)").replace("3.9k", "3.3k")
    comparison = _compared(COMMON_EMITTER, new)
    assert comparison.electrical
    assert comparison.attributions == ()
    assert "signal path" in comparison.notes[0]


def test_circuits_that_have_little_in_common_are_not_attributed() -> None:
    comparison = _compared(COMMON_EMITTER, (SAMPLES / "cascode-if/cascode-if.cir").read_text())
    assert comparison.electrical
    assert comparison.attributions == ()
    assert "too different (7 of 18 parts keep their place)" in comparison.notes[0]


def test_a_move_that_the_edits_one_by_one_do_not_explain_is_not_attributed() -> None:
    """The nets of a bipolar and of a MOS stage are alike; each edit alone breaks the bias."""
    comparison = _compared(COMMON_EMITTER, (SAMPLES / "mosfet-stage/mosfet-stage.cir").read_text())
    assert "nothing is attributed of low corner" in comparison.notes[0]
    for kept in comparison.attributions:
        assert abs(kept.remainder) <= abs(kept.new - kept.old)


def test_temperature_is_an_edit() -> None:
    new = COMMON_EMITTER.replace(".ac dec", ".temp 60\n.ac dec")
    comparison = _compared(COMMON_EMITTER, new)
    (row,) = comparison.parts
    assert (row.part, row.details[0].old, row.details[0].new) == ("circuit", 27.0, 60.0)
    assert _moved(comparison, "low corner").effects[0].edit == "temperature"


def test_at_most_forty_edits_are_attributed_and_the_rest_is_said() -> None:
    ladder = "".join(f"R{n} a n{n} 1k\nC{n} n{n} 0 1p\n" for n in range(1, 46))
    old = f"ladder\nV1 in 0 AC 1\nC0 in a 1u\nRA a 0 10k\n{ladder}.print ac v(a)\n"
    comparison = _compared(old, old.replace(" 1k\n", " 1.1k\n").replace("RA a 0 10k", "RA a 0 9k"))
    low = _moved(comparison, "low corner")
    assert len(low.effects) == 40
    assert "6 of 46 edits are not attributed" in low.notes[0]


@pytest.mark.parametrize("seed", range(8))
def test_all_edits_together_make_the_new_circuit(seed: int) -> None:
    """Whatever was edited and renamed, the old circuit with every edit has the new figures."""
    chance = random.Random(seed)
    base = chance.choice([FEEDBACK_PAIR, PHONO_STAGE])
    lines = base.splitlines()
    parts = [n for n, line in enumerate(lines) if re.match(r"[RC]\w* ", line)]
    for n in chance.sample(parts, 4):
        *head, value = lines[n].split()
        number = parse_number(value)
        assert number is not None
        lines[n] = " ".join([*head, f"{number.value * chance.uniform(0.6, 1.6):.5g}"])
    lines.insert(parts[0], f"C77 {'d1' if base is PHONO_STAGE else 'c1'} 0 33p")
    old = _analysed(base)
    new = _analysed(_scrambled("\n".join(lines), seed))
    matching = match(old.circuit, new.circuit)
    path = old.topology.path
    made = analyze_circuit(
        old.netlist,
        apply(old.circuit, find_edits(old.circuit, new.circuit, matching)),
        path.source,
        path.output_node,
    )
    want, got = new.review.paths[0], made.review.paths[0]
    assert got.gain == pytest.approx(want.gain)
    for a, b in ((want.low, got.low), (want.high, got.high)):
        assert (a is None) == (b is None)
        if a is not None and b is not None:
            assert b.exact_hz == pytest.approx(a.exact_hz)


@pytest.mark.parametrize("seed", range(2))
def test_a_part_put_in_series_is_found_in_a_netlist_numbered_afresh(seed: int) -> None:
    new = _edited(FEEDBACK_PAIR, ("RF", "RF  fb  x1  22k\nRX x1 e1 470"))
    comparison = _compared(FEEDBACK_PAIR, _scrambled(new, seed))
    edited = {(row.kind, row.old_name) for row in comparison.parts if row.electrical}
    assert edited == {("changed", "RF"), ("added", "")}
    (gain,) = _moved(comparison, "midband gain").effects
    assert gain.share == pytest.approx(1.0)


REFERRING = """parts that refer to others
V1 in 0 AC 1
RS in a 50
L1 a 0 1m
L2 b 0 4m
K1 L1 L2 0.98
R2 b 0 10k
E1 c 0 b 0 2
R3 c d 1k
V9 d e 0
R4 e 0 1k
F1 0 f V9 10
R5 f 0 1k
B1 g 0 V = 2*v(f) + 50*i(V9)
R6 g out 1k
X1 out 0 pad
.subckt pad p q
R1 p q 10k
C1 p m 1n
R2 m q 100
.ends
.print ac v(out)
"""
RENAMED = """parts that refer to others, renamed
V5 n1 0 AC 1
RA n1 n2 50
L7 n2 0 1m
L8 n3 0 4m
K3 L7 L8 0.98
RB n3 0 10k
E2 n4 0 n3 0 2
RC n4 n5 1k
V6 n5 n6 0
RD n6 0 1k
F2 0 n7 V6 10
RE n7 0 1k
B2 n8 0 V = 2*v(n7) + 50*i(V6)
RF n8 n9 1k
X7 n9 0 pad
.subckt pad p q
R1 p q 10k
C1 p m 1n
R2 m q 100
.ends
.print ac v(n9)
"""


def test_references_follow_the_parts_they_name() -> None:
    comparison = _compared(REFERRING, RENAMED)
    assert not comparison.electrical
    assert {row.kind for row in comparison.parts} == {"renamed"}


@pytest.mark.parametrize(
    ("before", "after", "part", "what"),
    [
        ("K3 L7 L8 0.98", "K3 L7 L8 0.9", "K3", "coefficient"),
        ("F2 0 n7 V6 10", "F2 0 n7 V6 12", "F2", "gain"),
        ("2*v(n7)", "3*v(n7)", "B2", "written as"),
        ("C1 p m 1n", "C1 p m 3n", "X7.C1", "value"),
    ],
)
def test_an_edit_of_a_part_that_refers_to_others_moves_a_figure(
    before: str, after: str, part: str, what: str
) -> None:
    comparison = _compared(REFERRING, RENAMED.replace(before, after))
    (edited,) = [row for row in comparison.parts if row.electrical]
    assert (edited.new_name, edited.details[0].what) == (part, what)
    assert comparison.attributions
    for attribution in comparison.attributions:
        (effect,) = attribution.effects
        assert (effect.parts, effect.share) == ((part,), pytest.approx(1.0))
