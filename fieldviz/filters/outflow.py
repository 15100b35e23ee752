"""The outflow as a filter: launching and Mach surfaces, the mass flux, and a table."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
from vtkmodules.vtkCommonDataModel import vtkMultiBlockDataSet, vtkPolyData

from fieldviz.derived.mach import MachSurface, mach_numbers, mach_surface
from fieldviz.errors import FieldvizError
from fieldviz.filters.base import FieldvizAlgorithm, Setting, given_range, given_value
from fieldviz.filters.mass_flux import arrows, flux_on, ribbons
from fieldviz.filters.pieces import (
    add_arrays,
    azimuth_nodes,
    fill_table,
    poly_data,
    quads_of_rows,
    set_cells,
)
from fieldviz.filters.ranks import Ranks, whole_snapshot
from fieldviz.filters.trees import describe
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array
from fieldviz.wind.launch_surfaces import SURFACE_KINDS, LaunchSurface, Surface
from fieldviz.wind.outflow import Outflow, outflow

__all__ = ["OutflowSurfaces"]

_CONES = "cones"
_KINDS = ("slow", "sonic", "alfven", "fast")
_FLUX = ("arrows", "ribbons", "none")


class OutflowSurfaces(FieldvizAlgorithm):
    """Where the wind begins, where it passes critical speeds, what it carries; and the numbers.

    Settings
    --------
    Surface : str
        "cones" at Height scale heights, "outflow", "slow", "sonic" or "beta".
    Height, Thickness, Radii
        Of the cones in H; H/R (0: worked out); 0, 0 for all radii.
    Mach : str
        "none", "slow", "sonic", "alfven", "fast" or "all".
    MassFlux : str
        "arrows" on the launching surfaces, "ribbons" along streamlines, or "none".
    Count : int
        Arrows along radius, or ribbons, on each side.
    Length : float
        Of the longest arrow, in units of its radius.
    """

    TITLE = "Fieldviz Outflow"
    OUTPUTS = ("vtkMultiBlockDataSet", "vtkTable")
    SETTINGS = {  # noqa: RUF012
        "Surface": Setting(_CONES, (_CONES, *SURFACE_KINDS)),
        "Height": Setting(4.0),
        "Thickness": Setting(0.0),
        "Radii": Setting((0.0, 0.0)),
        "Mach": Setting("alfven", ("none", *_KINDS, "all")),
        "MassFlux": Setting("arrows", _FLUX),
        "Count": Setting(12),
        "Length": Setting(0.35),
    }

    def work(self, inputs: Any, outputs: Any) -> None:
        """Measure and draw."""
        snapshot = whole_snapshot(inputs[0], "measure the outflow")
        if Ranks().rank:
            return
        kind = self.GetSurface()
        surface: Surface = self.GetHeight() if kind == _CONES else kind
        found = outflow(
            snapshot,
            surface,
            thickness=given_value(self.GetThickness()),
            radii=given_range(self.GetRadii()),
        )
        self.UpdateProgress(0.5)
        notes = [found.sentence, *found.notes]
        pieces = {"launching surface": _launching(snapshot, found)}
        pieces |= self._mach_surfaces(snapshot, notes)
        self.UpdateProgress(0.7)
        if self.GetMassFlux() != "none":
            pieces["mass flux"] = self._mass_flux(snapshot, found)
        for place, (name, piece) in enumerate(pieces.items()):
            describe(piece, snapshot, notes)
            number = np.full(piece.GetNumberOfCells(), place)
            add_arrays(piece.GetCellData(), {"piece": number})
            piece.GetCellData().SetActiveScalars("piece")
            outputs[0].SetBlock(place, piece)
            outputs[0].GetMetaData(place).Set(vtkMultiBlockDataSet.NAME(), name)
        _fill_numbers(outputs[1], found)
        for output in outputs:
            describe(output, snapshot, notes)

    def _mach_surfaces(self, snapshot: Snapshot, notes: list[str]) -> dict[str, vtkPolyData]:
        """The surfaces that are wanted; of "all" those that can be found."""
        wanted = {"none": (), "all": _KINDS}.get(self.GetMach(), (self.GetMach(),))
        found = {}
        numbers = mach_numbers(snapshot) if wanted else None
        for kind in wanted:
            assert numbers is not None
            try:
                sides = mach_surface(numbers, kind)
            except FieldvizError as error:
                if self.GetMach() != "all":
                    raise
                notes.append(f"no {kind} surface: {error}")
                continue
            found[f"{kind} surface"] = _mach(snapshot, sides)
        return found

    def _mass_flux(self, snapshot: Snapshot, found: Outflow) -> vtkPolyData:
        if self.GetMassFlux() == "arrows":
            return arrows(snapshot, found.surface, self.GetCount(), self.GetLength())
        return ribbons(
            snapshot,
            2 * self.GetCount(),
            height=self.GetHeight(),
            thickness=given_value(self.GetThickness()),
            r_range=given_range(self.GetRadii()),
        )


def _launching(snapshot: Snapshot, found: Outflow) -> vtkPolyData:
    """Both sides of the launching surface, with the mass flux through it."""
    surface: LaunchSurface = found.surface
    columns = [(np.stack([s.r_edges, s.on_edges]), s.there, n) for n, s in enumerate(surface.sides)]
    data, places = _revolved(snapshot, columns)
    flux = flux_on(snapshot, surface, places)
    add_arrays(data.GetPointData(), {"mass_flux": flux, "mass_flux_r2": flux * places[:, 0] ** 2})
    return data


def _mach(snapshot: Snapshot, sides: tuple[MachSurface, MachSurface]) -> vtkPolyData:
    """The outermost crossing of each column, where neighbours have one."""
    columns = []
    for n, side in enumerate(sides):
        theta = side.outermost_theta
        both = np.isfinite(theta[1:]) & np.isfinite(theta[:-1])
        columns.append((np.stack([side.r, theta]), both, n))
    data, _ = _revolved(snapshot, columns)
    return data


def _revolved(
    snapshot: Snapshot, columns: list[tuple[Array, Array, int]]
) -> tuple[vtkPolyData, Array]:
    """Curves (r, theta) of both sides turned through the wedge.

    A piece of a curve is drawn where the flag of its column is set.
    """
    phi = azimuth_nodes(snapshot.grid)
    points, corners, sides, first = [], [], [], 0
    for (r, theta), there, side in columns:
        places = np.empty((len(r), len(phi), 3))
        # A node without a surface beside it is not drawn; it must be some number all the same.
        places[..., 0], places[..., 1] = r[:, None], np.nan_to_num(theta, nan=0.5 * np.pi)[:, None]
        places[..., 2] = phi
        known = there & np.isfinite(theta[:-1]) & np.isfinite(theta[1:])
        quads = quads_of_rows(len(r), len(phi)).reshape(len(r) - 1, len(phi) - 1, 4)[known]
        corners.append(first + quads.reshape(-1, 4))
        sides.append(np.full(corners[-1].shape[0], side))
        points.append(places.reshape(-1, 3))
        first += places.shape[0] * places.shape[1]
    spherical = np.concatenate(points)
    data = poly_data(spherical)
    set_cells(data, "Polys", np.concatenate(corners))
    add_arrays(data.GetCellData(), {"side": np.concatenate(sides)})
    return data, spherical


def _fill_numbers(table: Any, found: Outflow) -> None:
    rows = list(_rows(found))
    names = ("quantity", "upper", "lower", "total")
    columns = zip(*rows, strict=True)
    fill_table(table, {name: list(values) for name, values in zip(names, columns, strict=True)})


def _rows(found: Outflow) -> Iterator[tuple[str, float, float, float]]:
    losses = {
        "mass loss": found.mass,
        "torque": found.torque,
        "torque of the gas": found.kinetic_torque,
        "torque of the field": found.magnetic_torque,
        "energy": found.energy,
        **{name.replace("_", " "): part for name, part in found.energy_parts.items()},
    }
    for name, loss in losses.items():
        yield name, loss.upper.net, loss.lower.net, loss.total
    arm = found.lever_arm
    yield "lever arm", arm.upper, arm.lower, arm.total
