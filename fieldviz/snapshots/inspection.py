"""What is in a file, as a person would want to know it before trusting it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from pathlib import Path

import h5py
import numpy as np

from fieldviz.derived.divergence import divergence_error
from fieldviz.errors import FieldvizError
from fieldviz.snapshots.dataset_range import DatasetRange, range_of_dataset
from fieldviz.snapshots.field_check import FieldReport, report_field, warnings_of
from fieldviz.snapshots.field_in_file import FileFields
from fieldviz.snapshots.file_listing import DatasetEntry, list_file, type_name
from fieldviz.snapshots.foreign import open_foreign
from fieldviz.snapshots.hdf5_access import open_hdf5
from fieldviz.snapshots.layout_description import LayoutDescription, layout_to_toml, read_layout
from fieldviz.snapshots.native import is_native, open_native
from fieldviz.snapshots.proposal import propose_layout
from fieldviz.wedge.fields import VELOCITY
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.snapshot import Snapshot

__all__ = ["DatasetReport", "GridReport", "Inspection", "inspect_file", "inspect_snapshot"]


@dataclass(frozen=True)
class GridReport:
    """The grid in numbers and words.

    Attributes
    ----------
    n_blocks, n_cells : int
    block_shape : dict of str to int
        Cells of a block along phi, theta and r.
    r : (float, float)
        Inner and outer radius, code units.
    theta : (float, float)
        Colatitudes in radians.
    degrees_from_midplane : (float, float)
        Of the upper boundary (positive) and of the lower one.
    phi : (float, float)
        Radians.
    azimuth : str
        What the azimuth covers, in words.
    blocks_of_level : dict of int to int
    """

    n_blocks: int
    n_cells: int
    block_shape: Mapping[str, int]
    r: tuple[float, float]
    theta: tuple[float, float]
    degrees_from_midplane: tuple[float, float]
    phi: tuple[float, float]
    azimuth: str
    blocks_of_level: Mapping[int, int]


@dataclass(frozen=True)
class DatasetReport:
    """One dataset of a file whose layout is not known."""

    path: str
    shape: tuple[int, ...]
    stored_type: str
    unit: str
    range: DatasetRange


@dataclass(frozen=True)
class Inspection:
    """All that was found.

    Attributes
    ----------
    path : str
    kind : {"native", "described", "unknown"}
        In fieldviz's own layout; read by a layout description; neither.
    title : str
    time : float or None
    constants : dict of str to float
    units : dict of str to str
        Unit scales, in words.
    grid : GridReport or None
    fields : tuple of FieldReport
    divergence : dict of str to float
        Size of div B, see `fieldviz.derived.divergence`; empty without a whole magnetic field.
    warnings : tuple of str
        What deserves a look, a line each.
    datasets : tuple of DatasetReport
        For an unknown layout.
    attributes : dict of str to value
        For an unknown layout, by the reference a description would use.
    links : tuple of str
        Links to other files, which are not followed.
    proposal : str
        For an unknown layout: a proposed layout description, as TOML.
    """

    path: str
    kind: str
    title: str = ""
    time: float | None = None
    constants: Mapping[str, float] = field(default_factory=dict)
    units: Mapping[str, str] = field(default_factory=dict)
    grid: GridReport | None = None
    fields: tuple[FieldReport, ...] = ()
    divergence: Mapping[str, float] = field(default_factory=dict)
    warnings: tuple[str, ...] = ()
    datasets: tuple[DatasetReport, ...] = ()
    attributes: Mapping[str, object] = field(default_factory=dict)
    links: tuple[str, ...] = ()
    proposal: str = ""

    def as_dict(self) -> dict[str, object]:
        """Give plain data for JSON; numbers that JSON cannot hold become null."""
        plain = _plain(asdict(self))
        assert isinstance(plain, dict)
        return plain


def inspect_file(
    path: str | Path, layout: str | Path | LayoutDescription | None = None
) -> Inspection:
    """Inspect any HDF5 file.

    Parameters
    ----------
    path : str or Path
    layout : str, Path or LayoutDescription, optional
        Layout description of a file that fieldviz did not write.

    Returns
    -------
    Inspection
        Never more than one block of one field is in memory; of the datasets of an unknown layout
        only a part may be read, which is then said.

    Raises
    ------
    SnapshotFileError, GridError, LayoutError
        If the file cannot be read, or the description does not fit it.
    """
    path = Path(path)
    with open_hdf5(path) as file:
        if layout is not None:
            description = read_layout(layout)
            snapshot = open_foreign(file, path, description)
            return inspect_snapshot(
                snapshot, kind="described", stated_units=_stated_units(file, snapshot)
            )
        if is_native(file):
            snapshot = open_native(file, path, None)
            return inspect_snapshot(snapshot, stated_units=_stated_units(file, snapshot))
        return _inspect_unknown(file, path)


def inspect_snapshot(
    snapshot: Snapshot, *, kind: str = "native", stated_units: Mapping[str, str] | None = None
) -> Inspection:
    """Inspect a snapshot, block by block.

    Parameters
    ----------
    snapshot : Snapshot
    kind : str
        See `Inspection`.
    stated_units : mapping of "cells/NAME" to str, optional
        Units the file states for its fields.
    """
    stated = stated_units or {}
    reports = [
        report_field(snapshot, where, name, stated.get(f"{where}/{name}", ""))
        for where, fields in (("cells", snapshot.cells), ("faces", snapshot.faces))
        for name in fields
    ]
    constants = {"mu0": snapshot.mu0, "gm": snapshot.gm}
    if snapshot.gamma is not None:
        constants["gamma"] = snapshot.gamma
    scales = snapshot.units
    units = {
        name: f"{unit.value:.6g} {unit.label}"
        for name, unit in (("length", scales.length), ("mass", scales.mass), ("time", scales.time))
        if unit is not None
    }
    error = divergence_error(snapshot)
    sizes = {"face": error.face, "cell": error.cell, "cell_largest": error.cell_largest}
    return Inspection(
        path=snapshot.source,
        kind=kind,
        title=snapshot.title,
        time=snapshot.time,
        constants=constants,
        units=units,
        grid=_grid_report(snapshot.grid),
        fields=tuple(reports),
        divergence={name: size for name, size in sizes.items() if size is not None},
        warnings=(*_grid_warnings(snapshot), *warnings_of(snapshot, reports, error)),
    )


def _grid_report(grid: WedgeGrid) -> GridReport:
    assert grid.level is not None
    n_phi, n_theta, n_r = grid.block_shape
    high, low = (90.0 - float(np.degrees(theta)) for theta in grid.theta_range)
    return GridReport(
        n_blocks=grid.n_blocks,
        n_cells=grid.n_cells,
        block_shape={"phi": n_phi, "theta": n_theta, "r": n_r},
        r=grid.r_range,
        theta=grid.theta_range,
        degrees_from_midplane=(high, low),
        phi=grid.phi_range,
        azimuth=grid.azimuth_sentence,
        blocks_of_level={
            level: int(np.count_nonzero(grid.level == level)) for level in grid.levels
        },
    )


def _grid_warnings(snapshot: Snapshot) -> list[str]:
    grid = snapshot.grid
    found = []
    upper, lower = grid.theta_range
    high, low = 90.0 - np.degrees(upper), np.degrees(lower) - 90.0
    if abs(high - low) > 1e-3 * max(abs(high), abs(low), 1e-3):
        found.append(
            f"theta reaches {high:.4g} degrees above the midplane and {low:.4g} below it: both "
            "sides can be compared over the common range only"
        )
    if grid.repeats is None and not grid.is_full_ring:
        found.append(
            f"the azimuth covers {np.degrees(grid.period):.6g} degrees, of which 360 degrees is "
            "not a whole multiple: full-ring totals cannot be made by repeating it"
        )
    if grid.block_shape[0] == 1:
        found.append("a single azimuth cell: nothing can be said of structure in azimuth")
    if grid.levels != [0] and len(grid.levels) == 1:
        found.append(f"all blocks are at level {grid.levels[0]}; the coarser ones may be missing")
    missing = [name for name in ("density", *VELOCITY) if not snapshot.has(name)]
    if missing:
        found.append(f"no {', '.join(missing)}: what is made from them will be absent")
    return found


def _stated_units(file: h5py.File, snapshot: Snapshot) -> dict[str, str]:
    """Units that the file states; none for a field that the description rescales."""
    units = {entry.path: entry.unit for entry in list_file(file).datasets}
    found = {}
    for kind, fields in (("cells", snapshot.cells), ("faces", snapshot.faces)):
        if not isinstance(fields, FileFields):
            continue
        for name in fields:
            dataset, factor = fields.origin(name)
            if abs(factor) == 1.0:
                found[f"{kind}/{name}"] = units.get(f"/{dataset.strip('/')}", "")
    return found


def _inspect_unknown(file: h5py.File, path: Path) -> Inspection:
    listing = list_file(file)
    warnings = [f"not followed: {link}" for link in listing.links]
    description, notes = propose_layout(file)
    if "" in notes:
        warnings.append(notes[""])
    return Inspection(
        path=str(path),
        kind="unknown",
        warnings=tuple(warnings),
        datasets=tuple(_dataset_report(file, entry) for entry in listing.datasets),
        attributes={entry.reference: entry.value for entry in listing.attributes},
        links=listing.links,
        proposal=layout_to_toml(description, unsure=notes),
    )


def _dataset_report(file: h5py.File, entry: DatasetEntry) -> DatasetReport:
    try:
        found = range_of_dataset(file, entry)
    except (FieldvizError, OSError, RuntimeError, TypeError, ValueError) as error:
        reason = (str(error).splitlines() or [type(error).__name__])[0]
        found = DatasetRange(note=f"not read: {reason}")
    return DatasetReport(entry.path, entry.shape, type_name(entry.dtype), entry.unit, found)


def _plain(value: object) -> object:
    if isinstance(value, Mapping):
        return {str(key): _plain(entry) for key, entry in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(entry) for entry in value]
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, float) and not np.isfinite(value):
        return None
    return value
