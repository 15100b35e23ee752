"""Write VTK objects to files: VTK's XML, or VTKHDF where the installed VTK can."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from vtkmodules.vtkCommonCore import vtkLogger, vtkOutputWindow, vtkStringOutputWindow, vtkVersion
from vtkmodules.vtkCommonDataModel import vtkCompositeDataSet, vtkMultiBlockDataSet, vtkPolyData
from vtkmodules.vtkIOXML import vtkXMLMultiBlockDataWriter, vtkXMLPolyDataWriter

from fieldviz.errors import FieldvizError, SnapshotFileError
from fieldviz.output import whole_file, whole_folder
from fieldviz.snapshots.hdf5_access import open_hdf5

__all__ = ["SUFFIXES", "write_poly_data", "write_vtk"]

SUFFIXES = (".vtm", ".vtkhdf")


def write_vtk(path: str | Path, data: vtkMultiBlockDataSet) -> list[Path]:
    """Write a MultiBlock; the final name appears once all is written.

    Parameters
    ----------
    path : str or Path
        Ends in ".vtm" (VTK's XML: an index beside a folder of the same stem) or ".vtkhdf".
    data : vtkMultiBlockDataSet
        VTKHDF keeps cell data but no field data (time, units): VTK's writer leaves them out.

    Returns
    -------
    list of Path
        What was written.

    Raises
    ------
    FieldvizError, SnapshotFileError
        Another suffix, a folder of other data in the way, a VTK that cannot write VTKHDF of this
        kind, or a failing disk.
    """
    path = Path(path)
    if path.suffix == ".vtm":
        return _write_xml(path, data)
    if path.suffix == ".vtkhdf":
        return _write_vtkhdf(path, data)
    raise FieldvizError(
        f"Cannot export to {path}: expected a name ending in {' or '.join(SUFFIXES)}, "
        f"got '{path.suffix}'; rename the output."
    )


def _write_xml(path: Path, data: vtkMultiBlockDataSet) -> list[Path]:
    parts = path.with_suffix("")
    _check_replaceable(parts)
    with whole_folder(parts) as temporary_parts, whole_file(path) as temporary, _quiet_vtk():
        # The writer puts the pieces into a folder named like the index, so both are written
        # together in the temporary folder and the index is moved out last.
        index = temporary_parts / path.name
        writer = vtkXMLMultiBlockDataWriter()
        writer.SetFileName(str(index))
        writer.SetInputData(data)
        writer.SetDataModeToAppended()
        writer.EncodeAppendedDataOff()
        done = writer.Write() and not writer.GetErrorCode()
        if not (done and all(map(_is_whole, temporary_parts.rglob("*.vt?")))):
            raise SnapshotFileError(_failed(path))
        pieces = temporary_parts / path.stem
        for piece in list(pieces.iterdir()):
            piece.rename(temporary_parts / piece.name)
        pieces.rmdir()
        index.replace(temporary)
    return [path, parts]


def write_poly_data(path: str | Path, data: vtkPolyData) -> None:
    """Write poly data as VTK's XML (.vtp); the name appears once all is written."""
    path = Path(path)
    with whole_file(path) as temporary, _quiet_vtk():
        writer = vtkXMLPolyDataWriter()
        writer.SetFileName(str(temporary))
        writer.SetInputData(data)
        writer.SetDataModeToAppended()
        writer.EncodeAppendedDataOff()
        if not writer.Write() or writer.GetErrorCode() or not _is_whole(temporary):
            raise SnapshotFileError(_failed(path))


def _is_whole(piece: Path) -> bool:
    """Whether an XML file has its end: VTK does not notice every write that fails."""
    with piece.open("rb") as file:
        file.seek(max(0, piece.stat().st_size - 64))
        return b"</VTKFile>" in file.read()


def _check_replaceable(parts: Path) -> None:
    """Refuse to replace a folder that holds anything but pieces of an earlier export."""
    foreign = [p for p in parts.glob("*") if p.suffix != ".vts"] if parts.exists() else []
    if foreign or (parts.exists() and not parts.is_dir()):
        raise FieldvizError(
            f"Cannot export beside {parts}: expected that name to be free for the pieces, got "
            f"other data there ({(foreign or [parts])[0].name}); choose another output name."
        )


def _write_vtkhdf(path: Path, data: vtkMultiBlockDataSet) -> list[Path]:
    try:
        from vtkmodules.vtkIOHDF import vtkHDFWriter
    except ImportError as error:
        raise FieldvizError(_no_vtkhdf(path)) from error
    # HDF5 inside VTK cannot recover from a full disk, so the room is asked for first.
    if (
        path.parent.is_dir()
        and shutil.disk_usage(path.parent).free < 1024 * data.GetActualMemorySize()
    ):
        raise SnapshotFileError(_failed(path))
    with whole_file(path) as temporary, _quiet_vtk():
        writer = vtkHDFWriter()
        writer.SetFileName(str(temporary))
        writer.SetInputData(data)
        writer.SetWriteAllTimeSteps(False)
        if not writer.Write() or not temporary.exists():
            raise SnapshotFileError(_failed(path))
        if not _holds_all_blocks(temporary, data):
            raise FieldvizError(_no_vtkhdf(path))
    return [path]


def _holds_all_blocks(path: Path, data: vtkMultiBlockDataSet) -> bool:
    """Whether the file has every cell: older VTK leaves structured grids out without a word."""
    from vtkmodules.vtkIOHDF import vtkHDFReader

    with open_hdf5(path):
        reader = vtkHDFReader()
        reader.SetFileName(str(path))
        reader.Update()
        output = reader.GetOutputDataObject(0)
    return (
        isinstance(output, vtkCompositeDataSet)
        and output.GetNumberOfCells() == data.GetNumberOfCells()
    )


@contextmanager
def _quiet_vtk() -> Iterator[None]:
    """Keep VTK's own error texts off the screen; what failed is said in one line."""
    shown, verbosity = vtkOutputWindow.GetInstance(), vtkLogger.GetCurrentVerbosityCutoff()
    vtkLogger.SetStderrVerbosity(vtkLogger.VERBOSITY_OFF)
    vtkOutputWindow.SetInstance(vtkStringOutputWindow())
    try:
        yield
    finally:
        vtkOutputWindow.SetInstance(shown)
        vtkLogger.SetStderrVerbosity(verbosity)


def _failed(path: Path) -> str:
    return (
        f"Cannot write {path}: expected VTK's writer to finish, got a failure, most likely a full "
        "disk; free some space or choose another place."
    )


def _no_vtkhdf(path: Path) -> str:
    return (
        f"Cannot write {path}: expected a VTK that writes structured grids as VTKHDF, got VTK "
        f"{vtkVersion.GetVTKVersion()}, which does not; export to .vtm instead."
    )
