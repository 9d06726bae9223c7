"""Two reviews made by hand, with invented circuits: no analysis stands behind their figures.

``ONE_STAGE`` is a common-emitter stage with every field filled; ``TWO_STAGES`` is direct-coupled,
has no low corner, complex poles at its high end and as many missing figures as the rows allow.
"""

from __future__ import annotations

from tauledger.problems import Problem, Severity, SourceSpan
from tauledger.review.rows import (
    CornerRow,
    NamedValue,
    NodeRow,
    PathRow,
    Review,
    StageRow,
    TimeConstantRow,
    TransistorRow,
)


def _time_constant(
    name: str,
    nodes: tuple[str, str],
    value: float,
    role: str,
    end: str,
    figures: tuple[float, float, float, float] | None = None,
    **more: object,
) -> TimeConstantRow:
    resistance, tau, corner, share = figures or (None, None, None, None)
    fields: dict[str, object] = {"unit": "F", "zero_hz": None, "dc_voltage_v": None, "reason": ""}
    return TimeConstantRow(
        name=name,
        nodes=nodes,
        value=value,
        role=role,
        end=end,
        resistance_ohm=resistance,
        tau_s=tau,
        corner_hz=corner,
        share=share,
        **(fields | more),  # type: ignore[arg-type]
    )


def _bjt_values(gm: float, rpi: float, ro: float, cpi: float, cmu: float) -> tuple[NamedValue, ...]:
    return (
        NamedValue("gm", gm, "S"),
        NamedValue("rπ", rpi, "Ω"),
        NamedValue("ro", ro, "Ω"),
        NamedValue("β", gm * rpi, ""),
        NamedValue("Cπ", cpi, "F"),
        NamedValue("Cμ", cmu, "F"),
    )


WARNING = Problem(
    "value-letter-digit",
    Severity.WARNING,
    "RC has the value 4k7, which ngspice reads as 4000; it is taken as 4700",
    SourceSpan("samples/ribbon.cir", 9, 12, 3, "RC vcc col 4k7"),
    "Write 4.7k.",
)
NOTE = Problem("statement-ignored", Severity.NOTE, "the .control block was not run")

ONE_STAGE = Review(
    title="Ribbon microphone booster, one transistor",
    netlist="samples/ribbon.cir",
    version="0.1.0",
    temperature_c=27.0,
    nodes=(
        NodeRow("in", 0.0),
        NodeRow("base", 1.702),
        NodeRow("emit", 1.041),
        NodeRow("col", 7.153),
        NodeRow("vcc", 12.0),
        NodeRow("out", 0.0),
    ),
    transistors=(
        TransistorRow(
            "Q1",
            "NPN",
            "small_npn",
            "common emitter",
            "forward active",
            1.031e-3,
            6.112,
            _bjt_values(39.6e-3, 4.17e3, 78.9e3, 24.4e-12, 2.31e-12),
        ),
    ),
    paths=(
        PathRow(
            input="V1",
            output="out",
            midband_hz=8930.0,
            gain=-118.4,
            gain_unit="V/V",
            gain_db=41.47,
            input_resistance_ohm=3.21e3,
            output_resistance_ohm=4.43e3,
            stages=(
                StageRow(
                    1,
                    ("Q1",),
                    "common emitter",
                    "base",
                    "col",
                    -126.9,
                    3.21e3,
                    4.43e3,
                    "−gm·(RC‖RL‖ro) = −39.6 mS·3.22 kΩ",
                    -127.5,
                ),
            ),
            time_constants=(
                _time_constant(
                    "C1",
                    ("in", "base"),
                    10e-6,
                    "input coupling",
                    "low",
                    (3.46e3, 34.6e-3, 4.60, 0.0683),
                    dc_voltage_v=-1.702,
                    expression="RS + R1‖R2‖rπ",
                ),
                _time_constant(
                    "CE",
                    ("emit", "0"),
                    100e-6,
                    "emitter bypass",
                    "low",
                    (26.9, 2.69e-3, 59.2, 0.879),
                    zero_hz=1.59,
                    dc_voltage_v=1.041,
                    expression="RE‖((rπ + RS‖R1‖R2)/(β + 1))",
                    expression_deviation=0.0031,
                    exact_move=-0.872,
                ),
                _time_constant(
                    "C2",
                    ("col", "out"),
                    3.3e-6,
                    "output coupling",
                    "low",
                    (13.6e3, 44.9e-3, 3.55, 0.0527),
                    dc_voltage_v=7.153,
                    expression="RC‖ro + RL",
                ),
                _time_constant(
                    "Q1.Cμ",
                    ("base", "col"),
                    2.31e-12,
                    "device",
                    "high",
                    (33.0e3, 76.2e-9, 2.09e6, 0.918),
                    expression="RB + RC·(1 + gm·RB)",
                    expression_deviation=-0.021,
                ),
                _time_constant(
                    "Q1.Cπ",
                    ("base", "emit"),
                    24.4e-12,
                    "device",
                    "high",
                    (232.0, 5.66e-9, 28.1e6, 0.0682),
                    expression="rπ‖RS‖R1‖R2",
                ),
                _time_constant(
                    "CL",
                    ("out", "0"),
                    0.27e-12,
                    "load",
                    "high",
                    (4.07e3, 1.10e-9, 145e6, 0.0133),
                ),
                _time_constant(
                    "C9",
                    ("vcc", "0"),
                    100e-9,
                    "supply decoupling",
                    "no effect",
                    reason="straight across the supply VCC, so no signal current reaches it",
                    dc_voltage_v=12.0,
                ),
            ),
            low=CornerRow(
                "low",
                67.4,
                60.3,
                0.1177,
                ("CE",),
                (-59.4 + 0j, -4.1 + 0j, -3.5 + 0j),
                (0j, 0j, -1.59 + 0j),
                ("CE makes a zero at 1.59 Hz, far below its pole: the sum stands.",),
                improved_hz=60.9,
                improved_method="second order with zeros",
                improved_error=0.0099,
                highest_hz=67.4,
                changes=("CE × 2: 60.3 Hz → 34.8 Hz",),
                timing=("settles to 1 % in 209 ms after a small step (slowest pole 3.50 Hz)",),
            ),
            high=CornerRow(
                "high",
                1.917e6,
                1.934e6,
                -0.0088,
                ("Q1.Cμ",),
                (-1.94e6 + 0j, -310e6 + 0j),
                (2.73e9 + 0j,),
                ("The Miller effect multiplies Cμ: it sees RB times the stage gain.",),
            ),
            notes=(),
            gain_by_formulas=-119.0,
            gain_by_inspection=-118.5,
        ),
    ),
    problems=(WARNING, NOTE),
    supply_power_w=15.1e-3,
)

TWO_STAGES = Review(
    title="Strain gauge buffer, direct-coupled",
    netlist="bench/strain gauge.net",
    version="0.1.0",
    temperature_c=-40.0,
    nodes=(
        NodeRow("Net-(J1-G)", 0.0),
        NodeRow("drain", 9.21),
        NodeRow("e2", 8.53),
        NodeRow("out", -3.07e-3),
    ),
    transistors=(
        TransistorRow(
            "J1",
            "N-JFET",
            "jn_low",
            "common source",
            "saturation",
            2.1e-3,
            8.8,
            (
                NamedValue("gm", 3.9e-3, "S"),
                NamedValue("ro", 41e3, "Ω"),
                NamedValue("Cgs", 4.2e-12, "F"),
                NamedValue("Cgd", 1.9e-12, "F"),
            ),
        ),
        TransistorRow(
            "X1.Q2",
            "PNP",
            "2P-BX/7",
            "emitter follower",
            "forward active",
            -4.93e-3,
            -8.53,
            _bjt_values(0.19, 1.1e3, 12e3, 61e-12, 5.5e-12),
        ),
    ),
    paths=(
        PathRow(
            input="I1",
            output="out",
            midband_hz=None,
            gain=-47.3e3,
            gain_unit="Ω",
            gain_db=None,
            input_resistance_ohm=None,
            output_resistance_ohm=None,
            stages=(
                StageRow(1, ("J1",), "common source", "Net-(J1-G)", "drain", -5.17, None, 1.31e3),
                StageRow(2, ("X1.Q2",), "emitter follower", "drain", "out", None, 98e3, None),
            ),
            time_constants=(
                _time_constant(
                    "J1.Cgd",
                    ("Net-(J1-G)", "drain"),
                    1.9e-12,
                    "device",
                    "high",
                    (61e3, 116e-9, 1.37e6, 0.512),
                ),
                _time_constant(
                    "CF",
                    ("out", "Net-(J1-G)"),
                    2.2e-12,
                    "compensation",
                    "high",
                    (50e3, 110e-9, 1.45e6, 0.487),
                    dc_voltage_v=-3.07e-3,
                ),
                _time_constant("X1.Q2.Cπ", ("drain", "e2"), 61e-12, "device", "high"),
                TimeConstantRow(
                    name="L1",
                    nodes=("vdd", "drain"),
                    value=10e-6,
                    unit="H",
                    role="peaking",
                    end="in-band",
                    resistance_ohm=None,
                    tau_s=None,
                    corner_hz=None,
                    share=None,
                    zero_hz=None,
                    dc_voltage_v=None,
                    reason="its reactance equals the 1.31 kΩ it sees at 20.8 MHz, between the "
                    "corners, so it shapes the band instead of ending it",
                ),
            ),
            low=CornerRow(
                "low", None, None, None, (), (), (), ("the path is direct-coupled from J1 to out",)
            ),
            high=CornerRow(
                "high",
                0.703e6,
                1.12e6,
                -0.372,
                ("J1.Cgd", "CF"),
                (-0.84e6 + 0.71e6j, -0.84e6 - 0.71e6j, -55e6 + 0j),
                (),
                ("Two poles are complex: the sum of time constants reads low.",),
            ),
            notes=("The output is taken at out because .print names it.",),
        ),
    ),
    problems=(),
    supply_power_w=None,
)
