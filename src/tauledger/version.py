"""The version, in a module of its own so that a report can name it without the engine."""

VERSION = "0.1.0"
