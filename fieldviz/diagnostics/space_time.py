"""What changes with radius and time: net vertical field, surface density, wind angle, sheets."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np

from fieldviz.diagnostics.series_numbers import SeriesNumbers, SnapshotRecord
from fieldviz.diagnostics.stored_sheets import numbers, stored_sheets
from fieldviz.errors import FieldvizError
from fieldviz.sheets.sheet_history import SheetHistory
from fieldviz.sheets.tracking import track_flux_sheets
from fieldviz.wedge.geometry import centres
from fieldviz.wedge.typing import Array

__all__ = ["WIND_PAIRS", "SpaceTime", "space_time"]

WIND_PAIRS = ("outflow", "bend", "torque")


@dataclass(frozen=True, eq=False)
class SpaceTime:
    """Numbers against time and radius; maps (n_times, n_r), code units, NaN where absent.

    Attributes
    ----------
    times : (n_times,) array
    r_edges : (n_r + 1,) array
        Of the snapshot with the finest mesh.
    vertical_field : map
        r <B_z> of the azimuth-mean net field at the midplane, up positive; field times length.
    surface_density : map
        Mass over area.
    wind_angle : mapping of "outflow", "bend", "torque" to map
        Angle of the pair (upper, lower), degrees: 0 both sides alike, -45 upper only, +45 lower
        only, +-90 opposite, 180 both reversed. Constant over each band of radii.
    words : tuple of str
        Verdict on the wind at each time; empty where it is absent.
    history : SheetHistory or None
        Tracks of the flux sheets, to be drawn over the maps.
    notes : tuple of str
        What the numbers rest on, and why some are absent.
    """

    times: Array
    r_edges: Array
    vertical_field: Array
    surface_density: Array
    wind_angle: dict[str, Array]
    words: tuple[str, ...]
    history: SheetHistory | None
    notes: tuple[str, ...]

    @property
    def r(self) -> Array:
        """Middles of the rings, (n_r,)."""
        return centres(self.r_edges)


def space_time(series: SeriesNumbers) -> SpaceTime:
    """Lay the numbers of a series out against time and radius.

    Parameters
    ----------
    series : SeriesNumbers
        From `measure_series`, with the parts "plasma", "structure", "symmetry" and "flux_sheets"
        for all of it.

    Returns
    -------
    SpaceTime

    Raises
    ------
    FieldvizError
        If no snapshot has profiles.

    Notes
    -----
    Where meshes differ, a place takes the value of the ring it lies in; nothing is interpolated.
    """
    with_profiles = [record for record in series.records if record.table("radial")]
    if not with_profiles:
        raise FieldvizError(
            "Cannot lay out a series in space and time: expected a snapshot with profiles, got "
            f"none of {len(series.records)}; measure the parts structure and plasma."
        )
    r_edges = max((_edges(record) for record in with_profiles), key=len)
    notes: list[str] = []
    if any(not np.array_equal(_edges(record), r_edges) for record in with_profiles):
        notes.append("meshes differ in time: a place takes the value of the ring it lies in")
    r = centres(r_edges)
    fields = _map(series, r, partial(_profile, name="net B_z"))
    density = _map(series, r, partial(_profile, name="surface density"))
    angles = {name: _map(series, r, partial(_bands, name=name)) for name in WIND_PAIRS}
    maps = {"vertical field": fields, "surface density": density}
    maps |= {f"{name} angle": angle for name, angle in angles.items()}
    for name, values in maps.items():
        notes += _holes(name, values)
    history, why = _tracked(series)
    return SpaceTime(
        np.array(series.times),
        r_edges,
        fields * r,
        density,
        angles,
        tuple(_word(record) for record in series.records),
        history,
        (*notes, *why, *series.notes),
    )


def _edges(record: SnapshotRecord) -> Array:
    radial = record.table("radial")
    return numbers([*radial["r inner"], radial["r outer"][-1]])


def _map(
    series: SeriesNumbers,
    r: Array,
    profile: Callable[[SnapshotRecord], tuple[Array, Array] | None],
) -> Array:
    """One row for each record: values of the rings in which `r` lies."""
    found = np.full((len(series.records), len(r)), np.nan)
    for row, record in zip(found, series.records, strict=True):
        known = profile(record)
        if known is None:
            continue
        edges, values = known
        place = np.searchsorted(edges, r, side="right") - 1
        inside = (place >= 0) & (place < len(values))
        row[inside] = values[place[inside]]
    return found


def _profile(record: SnapshotRecord, name: str) -> tuple[Array, Array] | None:
    radial = record.table("radial")
    return (_edges(record), numbers(radial[name])) if name in radial else None


def _bands(record: SnapshotRecord, name: str) -> tuple[Array, Array] | None:
    """Edges of the bands of one pair, and its angle in each."""
    symmetry: dict[str, Any] = record.result("symmetry") or {}
    pair = symmetry.get(name)
    if not pair or not pair["bands"]:
        return None
    bands = pair["bands"]
    edges = [*(band["r_low"] for band in bands), bands[-1]["r_high"]]
    return numbers(edges), numbers([band["angle"] for band in bands])


def _word(record: SnapshotRecord) -> str:
    return str((record.result("symmetry") or {}).get("word", ""))


def _holes(name: str, values: Array) -> list[str]:
    empty = int(np.count_nonzero(~np.isfinite(values).any(axis=1)))
    return [f"no {name} at {empty} of {len(values)} times"] if empty else []


def _tracked(series: SeriesNumbers) -> tuple[SheetHistory | None, tuple[str, ...]]:
    results = [record.result("flux_sheets") for record in series.records]
    found = [stored_sheets(result) for result in results if result is not None]
    if not found:
        return None, ("no tracks of flux sheets: no snapshot has numbers of them",)
    history = track_flux_sheets(found)
    return history, history.notes
