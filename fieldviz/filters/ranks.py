"""Several ranks of one program: who has which blocks, and how all of them come together.

The reader gives each rank its share of the blocks. A filter needs the whole snapshot, as a line or
an integral knows no ranks; so blocks are exchanged through VTK's own controller, and every number
is then worked out from the same arrays in the same order as by one rank. Lines, surfaces and
tables come out on the first rank; trees of blocks stay spread. This shares out drawing and memory
of pictures, not the memory of an analysis.
"""

from __future__ import annotations

import io
import pickle
from typing import Any

import numpy as np
from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy
from vtkmodules.vtkCommonCore import vtkUnsignedCharArray
from vtkmodules.vtkCommonDataModel import vtkDataObject

from fieldviz.errors import FieldvizError
from fieldviz.vtk_data.block_parts import BlockParts, block_parts
from fieldviz.vtk_data.snapshot_from_vtk import snapshot_of_parts
from fieldviz.wedge.snapshot import Snapshot

__all__ = ["Ranks", "shared_blocks", "whole_snapshot"]

_AT_ONCE = 2**28  # bytes of all ranks together in one exchange: MPI counts in 32 bits


class Ranks:
    """The ranks that run this pipeline.

    Attributes
    ----------
    rank, size : int
        This one, and how many there are; 0 and 1 without MPI.
    """

    def __init__(self) -> None:
        try:
            from vtkmodules.vtkParallelCore import vtkMultiProcessController
        except ImportError:
            found = None
        else:
            found = vtkMultiProcessController.GetGlobalController()
        self._controller, self.rank, self.size = found, 0, 1
        if found is not None and found.GetNumberOfProcesses() > 1:
            self.rank, self.size = found.GetLocalProcessId(), found.GetNumberOfProcesses()

    def gather(self, mine: object) -> list[Any]:
        """What every rank hands in, in the order of ranks; every rank must call it."""
        if self.size == 1:
            return [mine]
        sent = np.frombuffer(pickle.dumps(mine, protocol=5), dtype=np.uint8)
        lengths = self._joined(np.array([len(sent)], dtype=np.int64).view(np.uint8))
        lengths = lengths.view(np.int64)
        step = _AT_ONCE // self.size
        parts: list[list[np.ndarray]] = [[] for _ in range(self.size)]
        for start in range(0, int(lengths.max()), step):
            row = self._joined(sent[start : start + step])
            ends = np.cumsum(np.clip(lengths - start, 0, step))
            for rank, piece in enumerate(np.split(row, ends[:-1])):
                parts[rank].append(piece)
        return [pickle.load(io.BytesIO(np.concatenate(some).tobytes())) for some in parts]

    def _joined(self, row: np.ndarray) -> np.ndarray:
        assert self._controller is not None
        received = vtkUnsignedCharArray()
        if not self._controller.AllGatherV(numpy_to_vtk(row, deep=1), received):
            raise FieldvizError(
                "Cannot exchange blocks between ranks: expected every rank to answer, got a "
                "failure; use fewer ranks."
            )
        return np.array(vtk_to_numpy(received))


def shared_blocks(count: int, piece: int, pieces: int) -> range:
    """Blocks of one rank: [count piece/pieces, count (piece + 1)/pieces)."""
    return range(count * piece // pieces, count * (piece + 1) // pieces)


def whole_snapshot(data: vtkDataObject, work: str) -> Snapshot:
    """The snapshot, all blocks of all ranks; every rank must call it.

    Raises
    ------
    FieldvizError
        As `snapshot_from_vtk`, and on every rank if one has a reason: a rank that left before the
        exchange would let the others wait for ever.
    """
    ranks = Ranks()
    if ranks.size == 1:
        return snapshot_of_parts(block_parts(data, work), work)
    mine: list[BlockParts] = []
    reason = ""
    try:
        mine = block_parts(data, work)
    except Exception as error:  # noqa: BLE001 - the others wait for this rank
        reason = str(error)
    answers = ranks.gather((mine, reason))
    for _, other in answers:
        if other:
            raise FieldvizError(other)
    found: dict[int, BlockParts] = {}
    for parts, _ in answers:
        if len({part.number for part in parts}) != len(parts):
            return snapshot_of_parts(parts, work)  # which says what is wrong
        # A source that knows no ranks gives all blocks to each of them.
        found |= {part.number: part for part in parts}
    return snapshot_of_parts(list(found.values()), work)
