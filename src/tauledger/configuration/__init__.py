"""``tauledger.toml``: what the schematic leaves out, and what the amplifier must do.

``settings`` holds the values, ``reading`` makes them from a file, ``choice`` finds those for a
netlist. Nothing is imported here: most netlists come without a configuration, and pay nothing.
"""
