"""Boards that keep the limits of a configuration."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np
from numpy.typing import NDArray

from tauledger.configuration.settings import Limit, Quantity
from tauledger.decide.judged import LEAST_HOLD, Demands
from tauledger.decide.statistics import wilson_interval
from tauledger.review.decisions import DemandRow, Yield

FloatArray = NDArray[np.float64]
BoolArray = NDArray[np.bool_]

AT_DC = "low corner, 0 Hz (gain down to DC)"


def yield_of(kept: BoolArray, limit: Limit | None = None) -> Yield:
    """The share of boards with its confidence interval."""
    passed, boards = int(kept.sum()), int(kept.size)
    low, high = wilson_interval(passed, boards)
    return Yield(
        limit.minimum.text if limit and limit.minimum else "",
        limit.maximum.text if limit and limit.maximum else "",
        passed,
        boards,
        passed / boards,
        low,
        high,
        _in_figure(limit.minimum) if limit else None,
        _in_figure(limit.maximum) if limit else None,
    )


def _in_figure(end: Quantity | None) -> float | None:
    if end is None:
        return None
    return float(10.0 ** (end.value / 20.0)) if end.unit == "dB" else end.value


def kept_by(values: FloatArray, limit: Limit) -> BoolArray:
    """Boards inside the limit; one without the figure is outside."""
    kept = ~np.isnan(values)
    with np.errstate(invalid="ignore", divide="ignore"):
        if limit.minimum:
            kept &= _in_unit(values, limit.minimum) >= limit.minimum.value
        if limit.maximum:
            kept &= _in_unit(values, limit.maximum) <= limit.maximum.value
    return kept


def _in_unit(values: FloatArray, end: Quantity) -> FloatArray:
    return 20.0 * np.log10(values) if end.unit == "dB" else values


def demand_rows(
    demands: Demands, found: Mapping[str, FloatArray], shown: set[str]
) -> Iterator[DemandRow]:
    """Everything judged that has no figure among ``shown``: what sets a corner, and limits of a
    figure without a finite value on any board or without a corner to hold them against."""
    for name, limit in demands.limits:
        if name not in shown:
            yield DemandRow(name, yield_of(kept_by(found[name], limit), limit))
    for limit in demands.at_dc:
        yield DemandRow(AT_DC, yield_of(_at_dc(found, limit), limit))
    for holder in demands.holders:
        yield DemandRow(holder.name, yield_of(_holds(found[holder.name])))


def total_yield(demands: Demands, found: Mapping[str, FloatArray]) -> Yield | None:
    """Boards that keep everything that is asked; None when nothing is."""
    kept = [kept_by(found[name], limit) for name, limit in demands.limits]
    kept += [_at_dc(found, limit) for limit in demands.at_dc]
    kept += [_holds(found[holder.name]) for holder in demands.holders]
    return yield_of(np.logical_and.reduce(kept)) if kept else None


def _at_dc(found: Mapping[str, FloatArray], limit: Limit) -> BoolArray:
    return kept_by(np.where(np.isnan(found["gain"]), np.nan, 0.0), limit)


def _holds(hold: FloatArray) -> BoolArray:
    with np.errstate(invalid="ignore"):
        return hold >= LEAST_HOLD
