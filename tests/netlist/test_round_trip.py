"""Printed values and printed netlists come back as they were."""

from __future__ import annotations

import math

from hypothesis import given, settings
from hypothesis import strategies as st

from tauledger.circuit import flatten
from tauledger.circuit.elements import Capacitor, Resistor, VoltageSource
from tauledger.netlist import Netlist, Subcircuit, parse
from tauledger.netlist.statements import Statement
from tauledger.quantity import format_spice

NAME_START = st.sampled_from("RCLVIQDJMXE")
NAME = st.text("abcXYZ019_-+/#~.:", min_size=1, max_size=8)
# Two slashes begin a comment at the head of a word, within braces too.
WORD = NAME.filter(lambda text: not text.startswith(("//", "+")))
EXPRESSION = st.text("ab+*/()12 ,?:<>=", max_size=12).filter(
    lambda text: " //" not in text and ",//" not in text
)
NODE = st.one_of(
    WORD,
    st.builds("Net-({}-{})".format, st.sampled_from(["Q1", "U2A", "R10"]), NAME),
    st.builds("${}_{:04}".format, st.sampled_from("NGD"), st.integers(1, 9999)),
)
ITEM = st.one_of(
    NODE,
    st.builds("{{{}}}".format, EXPRESSION),
    st.builds("'{}'".format, st.text("ab+* {}12", max_size=12)),
    st.builds("{}={}".format, st.text("abc", min_size=1), st.text("xyz019.", min_size=1)),
    st.builds("{}=({} {})".format, st.text("abc", min_size=1), WORD, WORD),
    st.builds("({} a={})".format, WORD, st.text("xyz019.", min_size=1)),
)
LINE = st.builds(
    lambda start, name, items: [start + name, *items],
    NAME_START,
    NAME,
    st.lists(ITEM, max_size=6),
)
BLANK = st.sampled_from([" ", "  ", "\t", ", ", "\n+ ", "\n* comment\n+", " \n\n+  "])


def shape(statement: Statement) -> list[str]:
    """What a statement says, without where it says it."""
    return [
        statement.name.text,
        *(" ".join(statement.text_of(item).split()) for item in statement.items),
    ]


def printed(netlist: Netlist | Subcircuit) -> list[str]:
    """A netlist as text: one line a statement, subcircuits behind."""
    lines = [" ".join(entry.line.text.split()) for entry in netlist.statements]
    for inner in netlist.subcircuits:
        lines += [" ".join(inner.header.line.text.split()), *printed(inner), ".ends"]
    return lines


def shapes(netlist: Netlist | Subcircuit) -> list[object]:
    return [
        [shape(entry) for entry in netlist.statements],
        [[shape(inner.header), *shapes(inner)] for inner in netlist.subcircuits],
    ]


@settings(max_examples=100, deadline=None)
@given(st.lists(LINE, min_size=1, max_size=6), st.data())
def test_items_survive_blanks_comments_and_continuations(
    lines: list[list[str]], data: st.DataObject
) -> None:
    text = "title"
    for line in lines:
        text += "\n" + line[0]
        for item in line[1:]:
            text += data.draw(BLANK) + item
    netlist = parse(text)
    assert netlist.problems == ()
    expected = [[" ".join(part.split()) for part in line] for line in lines]
    assert [shape(entry) for entry in netlist.statements] == expected


@settings(max_examples=100, deadline=None)
@given(
    st.recursive(
        st.lists(LINE, min_size=1, max_size=4),
        lambda inner: st.lists(st.one_of(LINE, st.tuples(NAME, inner)), min_size=1, max_size=4),
        max_leaves=12,
    )
)
def test_netlist_to_text_to_netlist(block: list[object]) -> None:
    def lines_of(entries: list[object]) -> list[str]:
        lines: list[str] = []
        for entry in entries:
            if isinstance(entry, tuple):
                lines += [f".subckt s{entry[0]} a b p=1", *lines_of(entry[1]), ".ends"]
            else:
                lines.append(" ".join(entry))  # type: ignore[arg-type]
        return lines

    first = parse("\n".join(["title", "R1 a b 1", *lines_of(block)]))
    assert first.problems == ()
    second = parse("\n".join(["title", *printed(first)]))
    assert shapes(first) == shapes(second)


FINITE = st.floats(1e-30, 1e30)


@settings(max_examples=100, deadline=None)
@given(FINITE, FINITE, st.floats(-1e9, 1e9))
def test_printed_values_come_back(ohms: float, farads: float, volts: float) -> None:
    circuit = flatten(
        parse(
            f"title\nR1 a 0 {format_spice(ohms)}\nC1 a 0 {{{format_spice(farads)}}}\n"
            f"V1 a 0 DC {format_spice(volts)}"
        )
    )
    resistor, capacitor, source = circuit.elements
    assert isinstance(resistor, Resistor)
    assert isinstance(capacitor, Capacitor)
    assert isinstance(source, VoltageSource)
    assert (resistor.resistance_ohm, capacitor.capacitance_f, source.dc) == (ohms, farads, volts)
    assert not [entry for entry in circuit.problems if entry.code != "value-femto"]
    assert math.isfinite(ohms)
