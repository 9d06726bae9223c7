"""Nothing of a netlist's text reaches ngspice, whatever the text is.

Two kinds of proof: the deck stays the same when every word of the circuit is replaced, and it
consists of a few forms of line in a few characters, stated here apart from the program's own check.
"""

from __future__ import annotations

import dataclasses
import re
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from simulate.circuits import EVERY_KIND
from tauledger.circuit import flatten
from tauledger.circuit.elements import (
    BehaviouralSource,
    Circuit,
    ControlledSource,
    Coupling,
    Element,
    IndependentSource,
    Model,
    Resistor,
    SemiconductorDevice,
)
from tauledger.netlist import parse
from tauledger.netlist.expression import Call, Expression, NodeVoltage, SourceCurrent
from tauledger.problems import ProblemError, SourceSpan
from tauledger.simulate.deck import print_deck

VALUE = r"-?\d+(\.\d+)?(e-?\d+|meg|[tgkmunpf])?"
NODE = r"(0|[nh]\d+)"
SETTINGS = rf"( [a-z][a-z0-9_]*={VALUE})*"
GRAMMAR = re.compile(
    rf"[rcl]\d+ {NODE} {NODE} {VALUE}"
    rf"|k\d+ l\d+ l\d+ {VALUE}"
    rf"|[vi]\d+ {NODE} {NODE} dc {VALUE}( ac 1)?"
    rf"|[eg]\d+ {NODE} {NODE} {NODE} {NODE} {VALUE}"
    rf"|[fh]\d+ {NODE} {NODE} v\d+ {VALUE}"
    rf"|bh?\d+ {NODE} {NODE} [vi]=[a-z0-9.,()+*/<>=!&|?:-]+"
    rf"|[dqjm]\d+( {NODE}){{2,4}} y\d+{SETTINGS}"
    rf"|\.model y\d+ (d|npn|pnp|njf|pjf|nmos|pmos|vdmos [np]chan){SETTINGS}"
    rf"|\.options{SETTINGS}"
    rf"|\.nodeset v\(n\d+\)={VALUE}",
    re.ASCII,
)
IN_FORMULAS = frozenset(
    (
        *("v", "i", "abs", "sqrt", "exp", "ln", "log10", "sin", "cos", "tan", "asin", "acos"),
        *("atan", "sinh", "cosh", "tanh", "asinh", "acosh", "atanh", "sgn", "nint", "floor"),
        *("ceil", "u", "u2", "uramp", "pow", "pwr", "pwl", "min", "max"),
    )
)
TITLE = "deck rebuilt from parsed elements"
EVIL = (
    "a\n.control\nshell touch pwned\n.endc",
    "x\r\n+ shell",
    "`touch pwned`",
    "$(touch pwned)",
    "q;quit",
    '"\'"',
    "{1}",
    ".include /etc/passwd",
    "*",
    "+",
    "naïve Ω\u202e",
    "n1",
    "0 ",
    "\x00",
    "",
    "\udc80",
    "v(n1)=1",
)
WORDS = st.text(max_size=30) | st.sampled_from(EVIL)
CIRCUIT = flatten(parse(EVERY_KIND, "kinds.cir"))
DECK = print_deck(CIRCUIT, "VIN")


def well_formed(lines: tuple[str, ...]) -> None:
    assert (lines[0], lines[-1]) == (TITLE, ".end")
    for line in lines[1:-1]:
        assert line.isascii(), line
        assert GRAMMAR.fullmatch(line), line
        if line[0] == "b":
            words = set(re.findall(r"(?<![a-z0-9.])[a-z]+\d*(?=\()", line.partition("=")[2]))
            assert words <= IN_FORMULAS, line


class Renamer:
    """Gives every text of a circuit another, the same text always the same one."""

    def __init__(self, words: list[str]) -> None:
        self.words = words
        self.known: dict[str, str] = {}

    def __call__(self, text: str) -> str:
        if text == "0":
            return text
        count = len(self.known)
        # The number keeps names apart that are the same word, or differ only in letter case.
        return self.known.setdefault(
            text.lower(), f"{self.words[count % len(self.words)]}{count:04d}"
        )

    def expression(self, node: Expression) -> Expression:
        match node:
            case NodeVoltage():
                return NodeVoltage(self(node.positive), self(node.negative))
            case SourceCurrent():
                return SourceCurrent(self(node.source))
            case Call():
                return Call(node.function, tuple(map(self.expression, node.arguments)))
        return node

    def element(self, element: Element, models: dict[int, Model]) -> Element:
        changes: dict[str, Any] = {
            "name": self(element.name),
            "nodes": tuple(map(self, element.nodes)),
            "span": SourceSpan(self("path"), 1, 1, 1, self("line")),
        }
        match element:
            case IndependentSource():
                changes["time_function"] = self("function")
            case ControlledSource():
                changes["control_nodes"] = tuple(map(self, element.control_nodes))
                changes["control_source"] = self(element.control_source)
            case Coupling():
                changes["inductors"] = tuple(map(self, element.inductors))
            case BehaviouralSource():
                changes["expression"] = self.expression(element.expression)
            case SemiconductorDevice(model=model):
                changes["model"] = models.setdefault(id(model), self.model(model))
                changes["parameters"] = {**element.parameters, self("instance key"): 1.0}
        return dataclasses.replace(element, **changes)

    def model(self, model: Model) -> Model:
        # Parameters nobody knows, and names that would change the type of the device.
        more = {self("model key"): 1.0, "npn": 1.0, "pjf": 1.0, "vdmos": 1.0}
        span = SourceSpan(self("path"), 1, 1, 1, self("line"))
        return Model(self(model.name), model.kind, {**model.parameters, **more}, span)

    def circuit(self, circuit: Circuit) -> Circuit:
        models: dict[int, Model] = {}
        return dataclasses.replace(
            circuit,
            title=self("title"),
            path=self("file"),
            elements=tuple(self.element(element, models) for element in circuit.elements),
            node_sets={self(node): value for node, value in circuit.node_sets.items()},
            output_hints=(tuple(self(word) for word in ("hint", "other")),),
        )


def test_the_deck_has_every_kind_of_line() -> None:
    well_formed(DECK.lines)
    assert {line[0] for line in DECK.lines[1:]} == set("rclkviefghbdqjm.")


@settings(max_examples=150, deadline=None)
@given(words=st.lists(WORDS, min_size=1, max_size=12))
def test_no_word_of_the_circuit_changes_the_deck(words: list[str]) -> None:
    rename = Renamer(words)
    deck = print_deck(rename.circuit(CIRCUIT), rename("VIN"))
    assert deck.lines == DECK.lines
    assert set(deck.nodes) == set(DECK.nodes)
    assert list(deck.elements.values()) == [rename(e.name) for e in CIRCUIT.elements]


@settings(max_examples=150, deadline=None)
@given(value=st.floats(allow_nan=False, allow_infinity=False))
def test_every_value_keeps_to_the_grammar(value: float) -> None:
    elements = (Resistor("R1", ("a", "0"), CIRCUIT.elements[0].span, value), *CIRCUIT.elements)
    well_formed(print_deck(dataclasses.replace(CIRCUIT, elements=elements), "VIN").lines)


@pytest.mark.parametrize("value", [float("nan"), float("inf"), -float("inf")])
def test_no_value_that_is_no_number(value: float) -> None:
    elements = (Resistor("R1", ("a", "0"), CIRCUIT.elements[0].span, value),)
    with pytest.raises(ProblemError, match="cannot be given to ngspice"):
        print_deck(dataclasses.replace(CIRCUIT, elements=elements), "VIN")


def test_an_element_nobody_knows_is_refused() -> None:
    elements = (Element("Z1", ("a", "0"), CIRCUIT.elements[0].span),)
    with pytest.raises(ProblemError, match="Z1 cannot be given to ngspice"):
        print_deck(dataclasses.replace(CIRCUIT, elements=elements), "VIN")


HOSTILE_NETLIST = """.title `touch {mark}` $(touch {mark}) ; shell touch {mark}
.control
shell touch {mark}
system touch {mark}
write {mark}
set outfile={mark}
.endc
V1 in/$touch{mark} 0 DC 0 AC 1 ; quit
R`touch` 0 in/$touch{mark} 1k
R2 in/$touch{mark} out.control 1k $ shell touch {mark}
C1 out.control 0 1n
Q.shell out.control b/quit 0 evil-model/../x area=1 shell=3
RB in/$touch{mark} b/quit 1Meg
RC out.control 0 2k
B1 bb 0 v=v(out.control)*2
RBB bb 0 1k
.model evil-model/../x npn (bf=100 mfg=`touch_{mark}` shell=1 control=2 npn=1)
.print ac v(out.control)
.control
shell touch {mark}
"""


@pytest.mark.referee
def test_a_hostile_netlist_runs_nothing(tmp_path: Path) -> None:
    mark = tmp_path / "pwned"
    netlist = tmp_path / "hostile.cir"
    netlist.write_text(HOSTILE_NETLIST.format(mark=mark))
    (tmp_path / ".spiceinit").write_text(f"shell touch {mark}\n")
    (tmp_path / "PySpice.py").write_text(f"open({str(mark)!r}, 'w')\n")
    script = "import sys; from tauledger.command import main; sys.exit(main())"
    done = subprocess.run(
        [sys.executable, "-c", script, "report", netlist.name, "--simulate"],
        cwd=tmp_path,
        env={"HOME": str(tmp_path), "PATH": ""},
        capture_output=True,
        encoding="utf-8",
        timeout=120,
    )
    assert done.returncode == 0, done.stderr
    assert "Beside ngspice" in done.stdout
    assert not mark.exists()
    circuit = flatten(parse(netlist.read_text(), "hostile.cir"))
    deck = print_deck(circuit, "V1")
    well_formed(deck.lines)
    text = "\n".join(deck.lines)
    assert not re.search("touch|pwned|shell|control|quit|evil|mfg", text)
