"""Corners of transistor amplifiers, with reasons, from their SPICE netlists."""
