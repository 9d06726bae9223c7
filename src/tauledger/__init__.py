"""Corners of transistor amplifiers, with reasons, from their SPICE netlists."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from tauledger.version import VERSION

if TYPE_CHECKING:
    from tauledger.analysis import Analysis, analyze, read

__version__ = VERSION
__all__ = ["Analysis", "analyze", "read"]


def __getattr__(name: str) -> Any:
    # The engine is loaded at first use, so that `tauledger --version` need not wait for numpy.
    if name in __all__:
        from tauledger import analysis

        return getattr(analysis, name)
    raise AttributeError(f"module 'tauledger' has no attribute {name!r}")
