"""Flux sheets from the file of a snapshot's numbers, so that they can be tracked in time."""

from __future__ import annotations

from dataclasses import fields
from typing import Any

import numpy as np

from fieldviz.sheets.criteria import SheetCriteria
from fieldviz.sheets.flux_map import FluxMap
from fieldviz.sheets.flux_profile import FluxProfile
from fieldviz.sheets.ridges import Ridge
from fieldviz.sheets.running import Kernel
from fieldviz.sheets.sheet_records import FluxSheet, FluxSheets
from fieldviz.wedge.typing import Array

__all__ = ["MEAN_MAP", "stored_sheets"]

MEAN_MAP = "read from numbers: the map of the midplane is its azimuth mean, and not smoothed again"


def stored_sheets(found: dict[str, Any]) -> FluxSheets:
    """Sheets as `find_flux_sheets` gave them, from the plain form of their result.

    Parameters
    ----------
    found : dict
        `result` of the part "flux_sheets".

    Returns
    -------
    FluxSheets
        Without the relation to the surface density. The midplane's map, which is not kept, has
        one azimuth: r <B_z>.
    """
    profile = found["profile"]
    return FluxSheets(
        tuple(_sheet(one) for one in found["sheets"]),
        tuple(_sheet(one) for one in found["patches"]),
        None,
        _profile(profile),
        SheetCriteria(**found["criteria"]),
        float(found["time"]),
        float(found["h"]),
        float(found["gm"]),
        (float(found["r_range"][0]), float(found["r_range"][1])),
        float(found["total_flux"]),
        float(found["unsigned_flux"]),
        (*found["notes"], MEAN_MAP),
    )


def _profile(found: dict[str, Any]) -> FluxProfile:
    edges, f, period = numbers(found["r_edges"]), numbers(found["f"]), float(found["period"])
    mean = FluxMap(
        edges, np.array([0.0, period]), f[None], 0, bool(found["midplane"]["from_faces"])
    )
    kernel = Kernel(None, numbers(found["kernel"]["variance"]), str(found["kernel"]["note"]))
    sigma, pressure = found["surface_density"], found["pressure"]
    return FluxProfile(
        edges,
        f,
        numbers(found["smooth"]),
        numbers(found["background"]),
        numbers(found["spread"]),
        mean,
        None if sigma is None else numbers(sigma),
        None if pressure is None else numbers(pressure),
        float(found["h"]),
        period,
        kernel,
        bool(found["quiet"]),
        np.array(found["bridged"], dtype=bool),
        tuple(found["notes"]),
    )


def _sheet(found: dict[str, Any]) -> FluxSheet:
    values = {field.name: found[field.name] for field in fields(FluxSheet)}
    for name in ("heights", "radii"):
        values[name] = numbers(values[name])
    for name in ("width", "wander", "unsigned_share"):
        values[name] = number(values[name])
    values["limits"], values["flags"] = tuple(values["limits"]), tuple(values["flags"])
    ridge = values["ridge"]
    values["ridge"] = None if ridge is None else _ridge(ridge)
    return FluxSheet(**values)


def _ridge(found: dict[str, Any]) -> Ridge | None:
    if isinstance(found["phi"], dict):  # Too many azimuths: left out.
        return None
    return Ridge(
        numbers(found["phi"]),
        numbers(found["radius"]),
        float(found["coverage"]),
        int(found["polarity"]),
        number(found["strength"]),
        numbers(found["widths"]),
        bool(found["spiral"]),
    )


def number(value: float | None) -> float:
    """A number of a plain form, where None stood for NaN."""
    return float("nan") if value is None else float(value)


def numbers(values: list[float | None]) -> Array:
    """An array of a plain form, where None stood for NaN."""
    return np.array([number(value) for value in values])
