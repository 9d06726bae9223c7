"""``tauledger.toml``: what the schematic leaves out, and what the amplifier must do.

The values stand here; ``reading`` makes them from a file, ``choice`` finds those for a netlist.
"""

from tauledger.configuration.settings import (
    CapacitorClass,
    Configuration,
    Dominance,
    GenericModels,
    Input,
    Limit,
    ModelFile,
    Output,
    PathSettings,
    Quantity,
    Supply,
)

__all__ = [
    "CapacitorClass",
    "Configuration",
    "Dominance",
    "GenericModels",
    "Input",
    "Limit",
    "ModelFile",
    "Output",
    "PathSettings",
    "Quantity",
    "Supply",
]
