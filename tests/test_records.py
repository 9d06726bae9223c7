"""Classes of tauledger.records against the same ones made by the standard library."""

from __future__ import annotations

import copy
import dataclasses
import inspect
import math
import pickle
import subprocess
import sys
from dataclasses import field
from pathlib import Path
from typing import Any, ClassVar

import pytest

from tauledger.circuit.elements import Capacitor
from tauledger.records import dataclass

SOURCES = Path(__file__).parents[1] / "src/tauledger"


@dataclass(frozen=True, slots=True)
class Part:
    name: str
    nodes: tuple[str, ...] = ()
    notes: dict[str, int] = field(default_factory=dict)

    @property
    def first(self) -> str:
        return self.nodes[0]


@dataclass(frozen=True, slots=True)
class Coil(Part):
    nodes: tuple[str, ...] = ("a", "b")
    henry: float = 1.0


@dataclasses.dataclass(frozen=True, slots=True)
class PlainPart:
    name: str
    nodes: tuple[str, ...] = ()
    notes: dict[str, int] = field(default_factory=dict)


@dataclasses.dataclass(frozen=True, slots=True)
class PlainCoil(PlainPart):
    nodes: tuple[str, ...] = ("a", "b")
    henry: float = 1.0


def test_fields_defaults_and_their_order_are_those_of_the_standard_library() -> None:
    for ours, theirs in ((Part, PlainPart), (Coil, PlainCoil)):
        made, plain = ours("C1"), theirs("C1")
        assert dataclasses.asdict(made) == dataclasses.asdict(plain)
        assert [(f.name, f.type) for f in dataclasses.fields(made)] == [
            (f.name, f.type) for f in dataclasses.fields(plain)
        ]
        assert repr(made) == repr(plain).replace("Plain", "")
        assert ours.__match_args__ == theirs.__match_args__
        assert ours.__slots__ == theirs.__slots__
        assert ours.__dataclass_params__.frozen  # type: ignore[attr-defined]
        # What help() shows, before and after the first instance alike.
        assert str(inspect.signature(ours)) == str(inspect.signature(theirs))
    assert Coil("L1", ("x", "y"), {}, 2.0).first == "x"
    assert Part("C1").notes is not Part("C2").notes


def test_equality_and_hash_go_by_class_and_fields() -> None:
    undefined = math.nan
    assert Coil("L1") == Coil("L1", henry=1.0) != Coil("L1", henry=2.0)
    assert Part("L1", ("a", "b")) != Coil("L1")
    assert Coil("L", henry=undefined) == Coil("L", henry=undefined)
    assert {Key("a", 1), Key("a", 1), Key("b", 1)} == {Key("b", 1), Key("a", 1)}
    with pytest.raises(TypeError, match="unhashable"):
        hash(Part("C1"))


@dataclass(frozen=True, slots=True)
class Key:
    name: str
    index: int


def test_an_instance_stays_as_it_was_made() -> None:
    part = Part("C1")
    with pytest.raises(dataclasses.FrozenInstanceError, match="'name'"):
        part.name = "C2"  # type: ignore[misc]
    with pytest.raises(dataclasses.FrozenInstanceError, match="'name'"):
        del part.name
    with pytest.raises(dataclasses.FrozenInstanceError, match="'other'"):
        part.other = 1  # type: ignore[attr-defined]
    assert not hasattr(part, "__dict__")


def test_copies_and_changes() -> None:
    coil = Coil("L1", ("x", "y"), {"n": 1}, 2.0)
    assert pickle.loads(pickle.dumps(coil)) == coil
    assert copy.deepcopy(coil) == coil
    assert copy.deepcopy(coil).notes is not coil.notes
    assert dataclasses.replace(coil, henry=3.0) == Coil("L1", ("x", "y"), {"n": 1}, 3.0)
    with pytest.raises(TypeError, match="farad"):
        dataclasses.replace(coil, farad=1.0)  # type: ignore[call-arg]


def test_wrong_arguments_are_named() -> None:
    with pytest.raises(TypeError, match=r"Part.__init__\(\) missing 1 .*'name'"):
        Part()  # type: ignore[call-arg]
    with pytest.raises(TypeError, match="unexpected keyword argument 'value'"):
        Part("C1", value=1)  # type: ignore[call-arg]


def test_they_match_patterns() -> None:
    match Coil("L1", ("p", "q")):
        case Coil(name, (first, _), henry=henry):
            assert (name, first, henry) == ("L1", "p", 1.0)
        case _:
            pytest.fail("no match")


def test_a_dataclass_of_another_make_cannot_be_a_base() -> None:
    with pytest.raises(TypeError, match="PlainPart is a dataclass of another make"):

        @dataclass(frozen=True, slots=True)
        class Mixed(PlainPart):
            value: float = 0.0


def _made(**namespace: Any) -> type:
    """A record of this body, as the decorator gets it."""
    return dataclass(frozen=True, slots=True)(type("Made", (), namespace))


@pytest.mark.parametrize(
    ("body", "told"),
    [
        ({"__annotations__": {"x": "int"}, "__repr__": lambda self: "mine"}, "__repr__"),
        ({"__annotations__": {"x": "int"}, "__eq__": lambda self, other: True}, "__eq__"),
        ({"__annotations__": {"x": "int"}, "__post_init__": lambda self: None}, "__post_init__"),
        ({"__annotations__": {"x": "ClassVar[dict[str, a.b]]"}, "x": 1}, "ClassVar"),
        ({"__annotations__": {"x": ClassVar[int]}, "x": 1}, "ClassVar"),
        ({"__annotations__": {"x": "dataclasses.InitVar[int]"}}, "InitVar"),
        ({"__annotations__": {"x": "list[int]"}, "x": []}, "mutable"),
        ({"__annotations__": {"x": "int"}, "x": field(default=1)}, "default_factory"),
        (
            {"__annotations__": {"x": "list[int]"}, "x": field(default_factory=list, repr=False)},
            "default_factory",
        ),
        ({"__annotations__": {"x": "int", "y": "int"}, "x": 1}, "y without a default"),
    ],
)
def test_what_the_standard_library_would_do_otherwise_is_refused(
    body: dict[str, Any], told: str
) -> None:
    with pytest.raises(TypeError, match=told):
        _made(**body)


def test_a_plain_subclass_keeps_its_own_init() -> None:
    record = _made(__annotations__={"x": "int"})

    class Five(record):  # type: ignore[misc, valid-type]
        def __init__(self) -> None:
            super().__init__(5)

    assert [Five().x, Five().x] == [5, 5]


def test_another_process_can_read_them() -> None:
    """Worker processes get circuits by pickle before they have made an instance themselves."""
    script = "import pickle, sys; print(pickle.load(sys.stdin.buffer).capacitance_f)"
    from tauledger.circuit import flatten
    from tauledger.netlist import parse

    (part,) = flatten(parse("one part\nC1 a 0 22n\n.end\n")).elements
    assert isinstance(part, Capacitor)
    done = subprocess.run(
        [sys.executable, "-c", script], input=pickle.dumps(part), capture_output=True, check=True
    )
    assert float(done.stdout) == 22e-9


def test_frozen_classes_of_the_package_are_made_here() -> None:
    """One that is not costs a cold start half a millisecond."""
    elsewhere = [
        str(path.relative_to(SOURCES))
        for path in SOURCES.rglob("*.py")
        if path.name != "records.py"
        and "frozen=True" in (text := path.read_text())
        and "from tauledger.records import dataclass" not in text
    ]
    assert not elsewhere
