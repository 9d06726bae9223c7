"""``tauledger.toml``: what it may say, and where each of its faults stands."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tomllib
from importlib import resources
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tauledger.commands.arguments import frequency
from tauledger.configuration import reading
from tauledger.configuration.choice import find_settings, settings_for
from tauledger.configuration.files import find_configuration
from tauledger.configuration.positions import Positions
from tauledger.configuration.reading import read_configuration
from tauledger.configuration.settings import PathSettings
from tauledger.configuration.tolerances import TOLERANCE_LETTERS
from tauledger.problems import ProblemError

WHOLE = """\
temperature = "35 °C"

[supplies]
"+12V" = "12 V"

[capacitors.electrolytic]
match = ["C2", "CE*"]
tolerance = { min = "-20 %", max = "80 %" }
rated_voltage = "25 V"

[capacitors.film]
match = "C*"
tolerance = "10 %"

[path.microphone]
netlist = "boards/*.cir"
midband = "1 kHz"
input = { node = "IN", resistance = "150 Ω" }
output = { node = ["OUT+", "OUT-"], load_resistance = "10 kΩ", load_capacitance = "220pF" }
models = ["models/*.lib"]
generic_models = { KT17 = "PNP" }

[path.microphone.supplies]
"-12V" = "-12 V"
"+12v" = "9 V"

[path.microphone.limits]
midband_gain = { min = "26 dB", max = "30 dB" }
low_corner.max = "20Hz"
high_corner = { min = "1.5 MHz" }
input_resistance = { min = "4k7Ω" }
capacitor_voltage_margin = { min = "20 %" }
low_corner_set_by = "C5"

[path.microphone.limits.current]
Q1 = { min = "1 mA", max = "2 mA" }
"""


def _write(folder: Path, text: str) -> Path:
    file = folder / "tauledger.toml"
    file.write_text(text, encoding="utf-8")
    return file


def _faults(folder: Path, text: str) -> list[tuple[str, int, int, str]]:
    """(code, line, column, marked text) of each problem, in order."""
    with pytest.raises(ProblemError) as raised:
        read_configuration(_write(folder, text))
    found = []
    for entry in raised.value.problems:
        assert entry.span is not None
        assert entry.advice
        start = entry.span.column - 1
        marked = entry.span.text[start : start + entry.span.length]
        found.append((entry.code, entry.span.line, entry.span.column, marked))
    return found


@pytest.fixture
def board(tmp_path: Path) -> Path:
    (tmp_path / "models").mkdir()
    (tmp_path / "models" / "b.lib").write_text(".model qb npn\n")
    (tmp_path / "models" / "a.lib").write_text(".model qa npn\n")
    (tmp_path / "boards").mkdir()
    return tmp_path


def _path(board: Path) -> PathSettings:
    (path,) = read_configuration(_write(board, WHOLE)).paths
    return path


def test_quantities_are_read_with_their_units(board: Path) -> None:
    path = _path(board)
    assert path.temperature is not None
    assert path.temperature.value == 35.0
    assert path.midband is not None
    assert path.midband.value == 1e3
    assert path.input is not None
    assert (path.input.nodes, path.input.resistance_ohm) == (("IN",), 150.0)
    assert path.output is not None
    assert path.output.nodes == ("OUT+", "OUT-")
    assert path.output.load_resistance_ohm == 10e3
    assert path.output.load_capacitance_f == pytest.approx(220e-12)
    windows = {
        (limit.figure, limit.subject): (
            limit.minimum and limit.minimum.value,
            limit.maximum and limit.maximum.value,
        )
        for limit in path.limits
    }
    assert windows == {
        ("midband_gain", ""): (26.0, 30.0),
        ("low_corner", ""): (None, 20.0),
        ("high_corner", ""): (1.5e6, None),
        ("input_resistance", ""): (4700.0, None),
        ("capacitor_voltage_margin", ""): (20.0, None),
        ("current", "Q1"): (pytest.approx(1e-3), pytest.approx(2e-3)),
    }
    assert [(entry.end, entry.part) for entry in path.dominance] == [("low", "C5")]


def test_a_path_adds_to_what_stands_at_the_top_and_counts_before_it(board: Path) -> None:
    path = _path(board)
    assert {s.node: s.voltage_v for s in path.supplies} == {"-12V": -12.0, "+12v": 9.0}
    assert [file.path.name for file in path.models] == ["a.lib", "b.lib"]
    assert [c.tolerance for c in path.capacitors] == [(-0.2, 0.8), (-0.1, 0.1)]
    assert path.generic is not None
    assert path.generic.kinds == {"kt17": "pnp"}


def test_every_fault_of_a_file_is_found_in_one_run_at_its_place(tmp_path: Path) -> None:
    text = """\
temprature = "25 °C"
[supplies]
VCC = 12
gnd = "0 V"
[path.line]
netlist = "line.cir"
input = { node = "IN", resistance = "600" }
output = { node = ["A", "B", "C"], load_resistance = "0 Ω" }
[path.line.limits]
low_corner = { max = "20 kΩ" }
high_corner = { min = "2 MHz", max = "1 MHz" }
midband_gain = {}
noise = { max = "1 V" }
[path.line.limits.node_voltage.coll]
mim = "5 V"
[path.other]
input = "VIN"
"""
    assert _faults(tmp_path, text) == [
        ("config-key-unknown", 1, 1, "temprature"),
        ("config-value", 3, 7, "12"),
        ("config-value", 4, 7, '"0 V"'),
        ("config-unit", 7, 37, '"600"'),
        ("config-value", 8, 19, '["A", "B", "C"]'),
        ("config-value", 8, 54, '"0 Ω"'),
        ("config-unit", 10, 22, '"20 kΩ"'),
        ("config-value", 11, 23, '"2 MHz"'),
        ("config-key-missing", 12, 1, "midband_gain"),
        ("config-key-unknown", 13, 1, "noise"),
        ("config-key-unknown", 15, 1, "mim"),
        ("config-key-missing", 16, 7, "other"),
    ]


@pytest.mark.parametrize(
    ("text", "suggestion"),
    [
        ("temprature = '25 °C'", "'temperature'"),
        ("[path.a]\nnetlist = 'a.cir'\nsuply = {}", "'supplies'"),
        ("[path.a]\nnetlist = 'a.cir'\nlimits.low_corner.maximum = '1 Hz'", "'max'"),
        ("[path.a]\nnetlist = 'a.cir'\nlimits.lower_corner.max = '1 Hz'", "'low_corner'"),
    ],
)
def test_an_unknown_key_brings_the_nearest_known_one(
    tmp_path: Path, text: str, suggestion: str
) -> None:
    with pytest.raises(ProblemError) as raised:
        read_configuration(_write(tmp_path, text))
    (entry,) = raised.value.problems
    assert entry.message.endswith(f"; did you mean {suggestion}?")


@pytest.mark.parametrize(
    ("text", "line", "column"),
    [
        ("[path.a]\nnetlist = a.cir\n", 2, 11),
        ("netlist = 'a'\nnetlist = 'b'\n", 2, 14),
        ("a = '''never closed", 1, 20),
        ("x = " + "[" * 5000, 1, 1),
    ],
)
def test_what_is_no_toml_is_one_problem_at_its_place(
    tmp_path: Path, text: str, line: int, column: int
) -> None:
    ((code, *place, _),) = _faults(tmp_path, text)
    assert code == "config-syntax"
    assert place == [line, column]


@pytest.mark.parametrize("pattern", ["../secret.lib", "/etc/passwd", "~/x.lib", "C:\\\\x.lib"])
@pytest.mark.parametrize("key", ["models", "netlist"])
def test_paths_out_of_the_folder_are_refused(tmp_path: Path, key: str, pattern: str) -> None:
    (tmp_path / "secret.lib").write_text(".model q npn\n")
    folder = tmp_path / "board"
    folder.mkdir()
    other = "" if key == "netlist" else 'netlist = "a.cir"\n'
    faults = _faults(folder, f'[path.a]\n{other}{key} = "{pattern}"\n')
    assert [fault[0] for fault in faults] == ["config-refused"]
    assert pattern in faults[0][3]


@pytest.mark.parametrize("pattern", ["link.lib", "*.lib", "away/x.lib", "away/*"])
def test_links_out_of_the_folder_are_refused(tmp_path: Path, pattern: str) -> None:
    outside = tmp_path / "outside"
    outside.mkdir()
    (outside / "x.lib").write_text(".model q npn\n")
    folder = tmp_path / "board"
    folder.mkdir()
    (folder / "link.lib").symlink_to(outside / "x.lib")
    (folder / "away").symlink_to(outside)
    faults = _faults(folder, f'models = "{pattern}"\n')
    # A pattern never enters a folder outside, so it finds nothing there.
    expected = "config-file-missing" if pattern == "away/*" else "config-refused"
    assert [fault[0] for fault in faults] == [expected]


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no pipes in this file system")
def test_a_pipe_is_neither_configuration_nor_model_file(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe.lib")
    faults = _faults(tmp_path, 'models = "pipe.lib"\n')
    assert [fault[0] for fault in faults] == ["config-file-missing"]
    with pytest.raises(ProblemError) as raised:
        read_configuration(tmp_path / "pipe.lib")
    assert raised.value.problems[0].code == "config-unreadable"


def test_the_nearest_configuration_within_the_roots_is_found(tmp_path: Path) -> None:
    inner = tmp_path / "work" / "boards" / "a"
    inner.mkdir(parents=True)
    _write(tmp_path, "")
    netlist = inner / "a.cir"
    root = (tmp_path / "work").resolve()
    assert find_configuration(netlist, (root,)) is None
    near = _write(tmp_path / "work" / "boards", "")
    assert find_configuration(netlist, (root,)) == near.resolve()


def test_a_configuration_that_is_a_link_out_of_the_roots_is_refused(tmp_path: Path) -> None:
    target = tmp_path / "target.toml"
    target.write_text("")
    work = tmp_path / "work"
    work.mkdir()
    (work / "tauledger.toml").symlink_to(target)
    with pytest.raises(ProblemError) as raised:
        find_configuration(work / "a.cir", (work.resolve(),))
    assert raised.value.problems[0].code == "config-refused"


def test_the_path_for_a_netlist_is_chosen_by_its_pattern_and_name(tmp_path: Path) -> None:
    text = """\
[path.left]
netlist = "boards/**/stereo*.cir"
[path.right]
netlist = "boards/one/stereo.cir"
[path.mono]
netlist = "mono.cir"
"""
    configuration = read_configuration(_write(tmp_path, text))
    netlist = tmp_path / "boards" / "one" / "stereo.cir"
    deep = tmp_path / "boards" / "two" / "old" / "stereo2.cir"
    chosen = [
        settings_for(configuration, netlist, "right"),
        settings_for(configuration, deep),
        settings_for(configuration, tmp_path / "mono.cir"),
        settings_for(configuration, tmp_path / "boards" / "mono.cir"),
    ]
    assert [entry and entry.name for entry in chosen] == ["right", "left", "mono", None]
    with pytest.raises(ProblemError, match="left, right") as raised:
        settings_for(configuration, netlist)
    assert raised.value.problems[0].code == "config-path-ambiguous"
    with pytest.raises(ProblemError) as raised:
        find_settings(tmp_path / "else.cir", (), configuration.path)
    assert raised.value.problems[0].code == "config-path-unmatched"


# Positions ----------------------------------------------------------------------------------------

_NAMES = st.text(st.characters(blacklist_categories=["Cs", "Cc"]), min_size=1, max_size=6)
_LEAVES = st.integers(-9, 9) | _NAMES | st.booleans()
_VALUES = st.recursive(
    _LEAVES, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(_NAMES, inner, max_size=3)
)


def _toml(value: Any) -> str:
    if isinstance(value, dict):
        return "{" + ", ".join(f"{_toml(k)} = {_toml(v)}" for k, v in value.items()) + "}"
    if isinstance(value, list):
        return "[ # note ]\n" + ",\n".join(map(_toml, value)) + "\n]" if value else "[]"
    return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")


@given(st.dictionaries(_NAMES, st.dictionaries(_NAMES, _VALUES, max_size=3), max_size=3))
def test_the_place_of_every_value_holds_its_text(content: dict[str, dict[str, Any]]) -> None:
    text = ""
    for table, pairs in content.items():
        text += f"# [no.table]\r\n[ {_toml(table)} ]\r\n"
        text += "".join(f"{_toml(k)}  = {_toml(v)} # x = 1\n" for k, v in pairs.items())
    assert tomllib.loads(text) == content
    positions = Positions(text, "f")
    for table, pairs in content.items():
        for key, value in pairs.items():
            key_span = positions.key((table, key))
            assert _marked(key_span) == _toml(key)
            if not isinstance(value, dict | list):
                span = positions.value((table, key))
                assert (_marked(span), span.line) == (_toml(value), key_span.line)


def _marked(span: Any) -> str:
    return str(span.text[span.column - 1 :][: span.length])


# Schema -------------------------------------------------------------------------------------------


PARTS = """\
[path.x]
netlist = "x.cir"

[capacitors.ceramic]
match = "C1"
tolerance = "Z"
dielectric = "X7R"
values = ["1 µF", "470nF"]
bias_curve = [{ voltage = "0 V", change = "0 %" }, { voltage = "10 V", change = "-35 %" }]

[capacitors.electrolytic]
match = "C*"
tolerance = "M"
polarised = true
series = "E3"
matched = "2 %"

[resistors.film]
match = "R*"
tolerance = "F"
rated_power = "0.25 W"

[transistors.any]
match = "Q*"
current_gain = { min = "-40 %", max = "60 %" }
base_emitter_voltage = "20 mV"
matched = true
rated_power = "0.3 W"

[diodes.clamp]
match = "D1"
rated_power = "500 mW"

[spread]
distribution = "truncated"
supply = "5 %"
temperature = { min = "-10 °C", max = "50 °C" }
"""


def test_part_classes_are_read_with_their_tolerances(tmp_path: Path) -> None:
    (path,) = read_configuration(_write(tmp_path, PARTS)).paths
    ceramic, electrolytic = path.capacitors
    assert ceramic.tolerance == (-0.2, 0.8)
    assert ceramic.values_f == pytest.approx((470e-9, 1e-6))
    assert ceramic.bias_curve == ((0.0, 0.0), (10.0, -0.35))
    assert (electrolytic.polarised, electrolytic.series) == (True, "E3")
    assert electrolytic.matched == pytest.approx(0.02)
    assert path.resistors[0].tolerance == (-0.01, 0.01)
    assert path.resistors[0].rated_power_w == 0.25
    assert path.transistors[0].current_gain == (-0.4, 0.6)
    assert path.transistors[0].base_emitter_voltage_v == pytest.approx((-0.02, 0.02))
    assert path.transistors[0].matched
    assert path.transistors[0].rated_power_w == pytest.approx(0.3)
    assert (path.diodes[0].match, path.diodes[0].rated_power_w) == (("d1",), pytest.approx(0.5))
    assert path.spread is not None
    assert path.spread.temperature_c == (-10.0, 50.0)
    assert path.spread.supply == pytest.approx((-0.05, 0.05))


@pytest.mark.parametrize(
    ("old", "new", "marked"),
    [
        ('tolerance = "Z"', 'tolerance = "C"', '"C"'),
        ('"truncated"', '"flat"', '"flat"'),
        ('series = "E3"', 'series = "E5"', '"E5"'),
        ("polarised = true", 'polarised = "yes"', '"yes"'),
        ('voltage = "10 V"', 'voltage = "-1 V"', "["),
        ('"470nF"', '"470 nH"', '"470 nH"'),
        ('supply = "5 %"', 'supply = "100 %"', '"100 %"'),
        ('rated_power = "0.3 W"', 'rated_power = "0 W"', '"0 W"'),
        ('rated_power = "500 mW"', 'rated_power = "0.5 V"', '"0.5 V"'),
        ('match = "D1"', "", "clamp"),
    ],
)
def test_a_faulty_part_class_is_marked(tmp_path: Path, old: str, new: str, marked: str) -> None:
    ((_, _, _, found),) = _faults(tmp_path, PARTS.replace(old, new))
    assert found.startswith(marked)


@pytest.mark.parametrize(
    ("given", "expected"),
    [("0.9 mHz", "at least 0.001 Hz"), ("1.1 THz", "at most 1 THz"), ("-1 kHz", "at least")],
)
def test_midband_has_the_range_of_its_option(tmp_path: Path, given: str, expected: str) -> None:
    text = '[path.a]\nnetlist = "a.cir"\nmidband = "{}"\n'
    with pytest.raises(ProblemError, match=f"midband: .* expected {expected}"):
        read_configuration(_write(tmp_path, text.format(given)))
    for end in ("1 mHz", "1 THz"):
        (path,) = read_configuration(_write(tmp_path, text.format(end))).paths
        assert path.midband is not None
        assert path.midband.value == frequency(end)  # as --midband reads it


def test_the_schema_knows_the_keys_that_are_read() -> None:
    text = resources.files("tauledger.configuration").joinpath("schema.json").read_text("utf-8")
    schema = json.loads(text)
    parts = schema["$defs"]

    def keys(table: dict[str, Any]) -> set[str]:
        assert table["additionalProperties"] is False
        return set(table["properties"])

    assert keys(schema) == set(reading.TOP_KEYS)
    assert keys(parts["path"]) == set(reading.PATH_KEYS)
    assert keys(parts["limits"]) == set(reading.LIMIT_KEYS)
    assert keys(parts["window"]) == set(reading.WINDOW_KEYS)
    assert keys(parts["capacitors"]["additionalProperties"]) == set(reading.CAPACITOR_KEYS)
    assert keys(parts["resistors"]["additionalProperties"]) == set(reading.RESISTOR_KEYS)
    assert keys(parts["transistors"]["additionalProperties"]) == set(reading.TRANSISTOR_KEYS)
    assert keys(parts["diodes"]["additionalProperties"]) == set(reading.DIODE_KEYS)
    assert keys(parts["spread"]) == set(reading.SPREAD_KEYS)
    assert parts["tolerance"]["oneOf"][1]["enum"] == list(TOLERANCE_LETTERS)
    inputs = [keys(entry) for entry in parts["input"]["oneOf"][1:]]
    assert set().union(*inputs) == set(reading.INPUT_KEYS)
    assert keys(parts["output"]["oneOf"][1]) == set(reading.OUTPUT_KEYS)
    kinds = parts["generic_models"]["oneOf"][1]["additionalProperties"]["enum"]
    assert kinds == list(reading.MODEL_KINDS)


# Command ------------------------------------------------------------------------------------------

BARE = """\
door line
R1 VCC base 68k
R2 base gnd 15k
RC VCC coll 3.9k
RE emit gnd 1k
CE emit gnd 100u
C1 base IN 2.2u
C2 coll OUT 1u
Q1 coll base emit KT17
J1 IN gnd conn_01x02
"""


def test_the_command_uses_the_configuration_it_finds_or_is_given(tmp_path: Path) -> None:
    netlist = tmp_path / "line.cir"
    netlist.write_text(BARE)
    text = """\
[path.line]
netlist = "line.cir"
supplies.VCC = "12 V"
input = { node = "IN", resistance = "600 Ω" }
output = { node = "OUT", load_resistance = "10 kΩ" }
"""
    _write(tmp_path, text)
    missing = _report(str(netlist))
    assert missing.returncode == 2
    assert "model-missing" in missing.stderr
    assert "--generic-models" in missing.stderr
    refused = _report(str(netlist), "--generic-models")
    assert refused.returncode == 2
    assert 'generic_models = { "KT17" = "npn" }' in refused.stderr
    other = tmp_path / "other.toml"
    other.write_text(text + 'generic_models = { KT17 = "npn" }\n')
    done = _report(str(netlist), "--config", str(other))
    assert done.returncode == 0, done.stderr
    assert "warning[model-generic]" in done.stderr
    assert "generic-npn" in done.stdout
    unmatched = _report(str(netlist), "--config", str(other), "--path", "lyne")
    assert unmatched.returncode == 2
    assert "config-path-unmatched" in unmatched.stderr


def _report(*arguments: str) -> subprocess.CompletedProcess[str]:
    code = "import sys; from tauledger.command import main; sys.exit(main())"
    command = [sys.executable, "-c", code, "report", *arguments]
    return subprocess.run(command, capture_output=True, encoding="utf-8", timeout=60)
