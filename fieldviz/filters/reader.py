"""The snapshot reader: a series of files as a MultiBlock for each time."""

from __future__ import annotations

import weakref
from pathlib import Path
from typing import Any

import numpy as np
from vtkmodules.vtkCommonCore import vtkCommand, vtkDataArraySelection
from vtkmodules.vtkCommonDataModel import vtkDataObject
from vtkmodules.vtkCommonExecutionModel import vtkStreamingDemandDrivenPipeline

from fieldviz.errors import FieldvizError
from fieldviz.filters.base import FieldvizAlgorithm, Setting, given_range
from fieldviz.filters.physical_units import in_physical_units
from fieldviz.filters.ranks import shared_blocks
from fieldviz.filters.trees import Part, fill_tree
from fieldviz.snapshots.hdf5_access import open_hdf5
from fieldviz.snapshots.native import is_native
from fieldviz.snapshots.reader import read_snapshot
from fieldviz.snapshots.series import SnapshotSeries, read_series
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["SnapshotReader"]

_CODE, _PHYSICAL = "code", "physical"


class SnapshotReader(FieldvizAlgorithm):
    """Reads snapshots; one MultiBlock (level, then block) for each time.

    Settings
    --------
    Layout : str
        Layout description (TOML) of files that fieldviz did not write.
    FinestLevel : int
        Blocks of finer levels are left out.
    Radii : (float, float)
        Only cells within; 0, 0 for all.
    Angles : (float, float)
        Degrees from the midplane, up positive; only cells within.
    Azimuths : (float, float)
        Degrees; only cells within; 0, 0 for all.
    Units : str
        "code", or "physical": the file's own scales of length, mass and time applied to all.
    Halo : bool
        Ghost cells where blocks meet, so that contours close.
    Faces : bool
        Hand face-centred fields on to filters.

    Examples
    --------
    >>> from fieldviz.filters.reader import SnapshotReader
    >>> reader = SnapshotReader()
    >>> reader.AddFileName("sample_wedge/saltmarsh_000.h5")  # doctest: +SKIP
    >>> reader.Update()  # doctest: +SKIP
    """

    TITLE = "Fieldviz Snapshot Reader"
    INPUTS = ()
    SETTINGS = {  # noqa: RUF012 - a table, never changed
        "Layout": Setting(""),
        "FinestLevel": Setting(99),
        "Radii": Setting((0.0, 0.0)),
        "Angles": Setting((-90.0, 90.0)),
        "Azimuths": Setting((0.0, 0.0)),
        "Units": Setting(_CODE, (_CODE, _PHYSICAL)),
        "Halo": Setting(1),
        "Faces": Setting(1),
    }

    def __init__(self) -> None:
        super().__init__()
        self._names: list[str] = []
        self._known: tuple[object, SnapshotSeries, list[float]] | None = None
        self._selection = vtkDataArraySelection()
        here = weakref.ref(self)

        def changed(caller: object, event: str) -> None:
            reader = here()
            if reader is not None:
                reader.Modified()

        self._selection.AddObserver(vtkCommand.ModifiedEvent, changed)

    def AddFileName(self, name: str | None) -> None:  # noqa: N802 - VTK's spelling
        """Add a file to the series."""
        if name and name.lower() != "none":  # what a host hands over for an empty list
            self._names.append(str(name))
            self.Modified()

    def ClearFileNames(self) -> None:  # noqa: N802
        """Forget all files."""
        self._names.clear()
        self.Modified()

    def SetFileName(self, name: str | None) -> None:  # noqa: N802
        """Read one file only."""
        self.ClearFileNames()
        self.AddFileName(name)

    def GetTimestepValues(self) -> list[float] | None:  # noqa: N802
        """Times of the series, once it is known."""
        return None if self._known is None else list(self._known[2])

    def GetCellArrays(self) -> Any:  # noqa: N802
        """Which cell fields to read, a vtkDataArraySelection."""
        return self._selection

    def CanReadFile(self, name: str) -> int:  # noqa: N802
        """1 for a file in fieldviz's own layout, whatever its name; else 0."""
        try:
            with open_hdf5(name) as file:
                return int(is_native(file))
        except FieldvizError:
            return 0

    def RequestInformation(self, request: Any, in_info: Any, out_info: Any) -> int:  # noqa: N802
        """Tell the times; a failure is told when data are asked for."""
        info = out_info.GetInformationObject(0)
        pipeline = vtkStreamingDemandDrivenPipeline
        info.Remove(pipeline.TIME_STEPS())
        info.Remove(pipeline.TIME_RANGE())
        if self._names and self.guarded(self._open):
            times = self.GetTimestepValues() or [0.0]
            for time in times:
                info.Append(pipeline.TIME_STEPS(), time)
            for time in (times[0], times[-1]):
                info.Append(pipeline.TIME_RANGE(), time)
        return super().RequestInformation(request, in_info, out_info)

    def RequestData(self, request: Any, in_info: Any, out_info: Any) -> int:  # noqa: N802
        """Read the time that is asked for, or the first one."""
        info = out_info.GetInformationObject(0)
        key = vtkStreamingDemandDrivenPipeline.UPDATE_TIME_STEP()
        self._wanted = info.Get(key) if info.Has(key) else None
        # The request for ghost cells is not heard: what is read must not depend on the ranks.
        piece = info.Get(vtkStreamingDemandDrivenPipeline.UPDATE_PIECE_NUMBER()) or 0
        pieces = info.Get(vtkStreamingDemandDrivenPipeline.UPDATE_NUMBER_OF_PIECES()) or 1
        self._share = (piece, pieces)
        return super().RequestData(request, in_info, out_info)

    def work(self, inputs: Any, outputs: Any) -> None:
        """Read one snapshot."""
        series, times = self._open()
        place = 0
        if self._wanted is not None:
            place = max(0, int(np.searchsorted(times, self._wanted, side="right")) - 1)
        snapshot = read_snapshot(
            series.paths[place], fields=self._chosen(), layout=self.GetLayout() or None
        )
        if self.GetUnits() == _PHYSICAL:
            snapshot = in_physical_units(snapshot)
        (tree,) = outputs
        fill_tree(
            tree,
            snapshot,
            halo=bool(self.GetHalo()),
            faces=bool(self.GetFaces()),
            part=self._part(),
            only=shared_blocks(snapshot.grid.n_blocks, *self._share),
            progress=self.UpdateProgress,
        )
        tree.GetInformation().Set(vtkDataObject.DATA_TIME_STEP(), times[place])

    def _open(self) -> tuple[SnapshotSeries, list[float]]:
        """The series and its times, from memory while no file has changed."""
        if not self._names:
            raise FieldvizError(
                "Cannot read: expected at least one file, got none; name one with File Names."
            )
        layout = self.GetLayout()
        key = (tuple((name, _changed(name)) for name in self._names), layout, _changed(layout),
               self.GetUnits())  # fmt: skip
        if self._known is None or self._known[0] != key:
            self._known = None
            series = read_series(self._names, layout=layout or None)
            first = series[0]
            scale = 1.0
            if self.GetUnits() == _PHYSICAL:
                unit = in_physical_units(first, check_only=True).units.time
                scale = unit.value if unit else 1.0
            self._known = (key, series, [time * scale for time in series.times])
            self._offer(first)
        return self._known[1], self._known[2]

    def _offer(self, snapshot: Snapshot) -> None:
        for name in snapshot.cell_names:
            if not self._selection.ArrayExists(name):
                self._selection.AddArray(name)

    def _chosen(self) -> list[str] | None:
        """Fields that are switched on; None for all."""
        count = self._selection.GetNumberOfArrays()
        names = [self._selection.GetArrayName(n) for n in range(count)]
        on = [name for name in names if self._selection.ArrayIsEnabled(name)]
        return None if len(on) == len(names) else on

    def _part(self) -> Part:
        angles = np.radians(self.GetAngles())
        azimuths = given_range(self.GetAzimuths())
        return Part(
            self.GetFinestLevel(),
            given_range(self.GetRadii()) or Part.r,
            (float(0.5 * np.pi - angles[1]), float(0.5 * np.pi - angles[0])),
            Part.phi if azimuths is None else _pair(np.radians(azimuths)),
        )


def _pair(values: Array) -> tuple[float, float]:
    return float(values[0]), float(values[1])


def _changed(name: str) -> int:
    """When a file was last changed; 0 where there is none."""
    try:
        return Path(name).stat().st_mtime_ns if name else 0
    except OSError:
        return 0
