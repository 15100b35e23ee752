"""One instant of a disc: a grid, its fields, and the constants that give them meaning."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from fieldviz.errors import FieldvizError, GridError, MissingFieldError
from fieldviz.wedge.fields import MAGNETIC, ArrayFields, Fields, missing_sentence
from fieldviz.wedge.grid import WedgeGrid
from fieldviz.wedge.typing import Array
from fieldviz.wedge.units import UnitScales

__all__ = ["Block", "Snapshot", "face_shape"]

_FACE_AXIS = {"magnetic_r": 2, "magnetic_theta": 1, "magnetic_phi": 0}
_NO_ARRAYS: Mapping[str, Array] = {}


@dataclass(frozen=True)
class Block:
    """One block as `Snapshot.from_blocks` takes it.

    Attributes
    ----------
    r_edges, theta_edges, phi_edges : (n + 1,) arrays
    cells : mapping of name to (n_phi, n_theta, n_r) array
    faces : mapping of name to array with one more entry along its own axis
    level : int or None
        Worked out from the cell sizes if no block names one.
    """

    r_edges: Array
    theta_edges: Array
    phi_edges: Array
    cells: Mapping[str, Array] = field(default_factory=dict)
    faces: Mapping[str, Array] = field(default_factory=dict)
    level: int | None = None


def face_shape(name: str, block_shape: tuple[int, int, int]) -> tuple[int, int, int]:
    """Shape (n_phi, n_theta, n_r) of a face-centred field: one more along its own axis."""
    if name not in _FACE_AXIS:
        raise FieldvizError(
            f"Cannot use the face-centred field '{name}': expected one of "
            f"{', '.join(_FACE_AXIS)}, got another name; give other fields as cell values."
        )
    shape = list(block_shape)
    shape[_FACE_AXIS[name]] += 1
    return shape[0], shape[1], shape[2]


@dataclass(frozen=True, eq=False)
class Snapshot:
    """A magnetised disc on a spherical-polar wedge at one time.

    Attributes
    ----------
    grid : WedgeGrid
        Blocks, levels, edges.
    cells : Fields
        Cell values, each (n_blocks, n_phi, n_theta, n_r): `density`, `pressure`,
        `velocity_r|theta|phi`, `magnetic_r|theta|phi`, any other scalar by its own name.
    faces : Fields
        Face-centred `magnetic_r|theta|phi`, one more entry along their own axis; may be empty.
    time : float
        Code time.
    mu0 : float
        1, or 4 pi for Gaussian fields.
    gm : float
        Gravitational parameter of the star in code units.
    gamma : float or None
        Adiabatic index, where it is known.
    title : str
    units : UnitScales
    source : str
        File the snapshot came from, for messages; empty for one made in memory.
    """

    grid: WedgeGrid
    cells: Fields
    faces: Fields
    time: float = 0.0
    mu0: float = 1.0
    gm: float = 1.0
    gamma: float | None = None
    title: str = ""
    units: UnitScales = field(default_factory=UnitScales)
    source: str = ""
    _made: dict[str, Array] = field(default_factory=dict, init=False, repr=False)

    def __post_init__(self) -> None:
        for name in ("time", "mu0", "gm"):
            value = getattr(self, name)
            if not np.isfinite(value) or (name != "time" and value <= 0):
                wanted = "a finite number" if name == "time" else "a positive number"
                raise FieldvizError(
                    f"Cannot build the snapshot: expected {name} to be {wanted}, got {value}."
                )

    @classmethod
    def from_arrays(
        cls,
        r_edges: Array,
        theta_edges: Array,
        phi_edges: Array,
        *,
        cells: Mapping[str, Array] = _NO_ARRAYS,
        faces: Mapping[str, Array] = _NO_ARRAYS,
        **constants: object,
    ) -> Snapshot:
        """Make a snapshot of one block.

        Parameters
        ----------
        r_edges, theta_edges, phi_edges : (n + 1,) arrays
            Edges; theta is colatitude in radians.
        cells : mapping of str to (n_phi, n_theta, n_r) array
        faces : mapping of str to array
            Face-centred magnetic field.
        **constants
            `time`, `mu0`, `gm`, `gamma`, `title`, `units`.

        Returns
        -------
        Snapshot

        Raises
        ------
        GridError, FieldvizError
            If edges or shapes do not fit.

        Examples
        --------
        >>> import numpy as np
        >>> import fieldviz as fv
        >>> snapshot = fv.Snapshot.from_arrays(
        ...     np.geomspace(1, 4, 9), np.linspace(1.0, 2.1, 13), np.linspace(0, 0.5, 5),
        ...     cells={"density": np.ones((4, 12, 8))})
        >>> snapshot.grid.n_cells
        384
        """
        block = Block(
            np.asarray(r_edges), np.asarray(theta_edges), np.asarray(phi_edges), cells, faces
        )
        return cls.from_blocks([block], **constants)

    @classmethod
    def from_blocks(cls, blocks: Sequence[Block], **constants: object) -> Snapshot:
        """Make a snapshot of several blocks of one shape, perhaps at different levels.

        Parameters
        ----------
        blocks : sequence of Block
            Leaf blocks that tile the wedge.
        **constants
            `time`, `mu0`, `gm`, `gamma`, `title`, `units`.

        Returns
        -------
        Snapshot

        Raises
        ------
        GridError, FieldvizError
            If the blocks differ in shape or fields, overlap or leave gaps.
        """
        if not blocks:
            raise GridError("Cannot build the snapshot: expected at least one block, got none.")
        grid = WedgeGrid(
            _stacked("r_edges", [block.r_edges for block in blocks]),
            _stacked("theta_edges", [block.theta_edges for block in blocks]),
            _stacked("phi_edges", [block.phi_edges for block in blocks]),
            _levels(blocks),
        )
        cells = _stacked_fields("cells", [block.cells for block in blocks])
        faces = _stacked_fields("faces", [block.faces for block in blocks])
        return cls.from_grid(grid, cells=cells, faces=faces, **constants)

    @classmethod
    def from_grid(
        cls,
        grid: WedgeGrid,
        *,
        cells: Mapping[str, Array] = _NO_ARRAYS,
        faces: Mapping[str, Array] = _NO_ARRAYS,
        **constants: object,
    ) -> Snapshot:
        """Make a snapshot on a known grid from arrays (n_blocks, n_phi, n_theta, n_r)."""
        cell_shape = (grid.n_blocks, *grid.block_shape)
        cell_shapes = dict.fromkeys(cells, cell_shape)
        face_shapes = {name: (grid.n_blocks, *face_shape(name, grid.block_shape)) for name in faces}
        return cls(
            grid,
            ArrayFields(cells, cell_shapes),
            ArrayFields(faces, face_shapes),
            **constants,  # type: ignore[arg-type]
        )

    def with_cells(self, **arrays: Array) -> Snapshot:
        """A copy of the snapshot with fields added or replaced; the others are shared."""
        merged = {name: self.cells[name] for name in self.cells} | arrays
        shape = (self.grid.n_blocks, *self.grid.block_shape)
        return replace(self, cells=ArrayFields(merged, dict.fromkeys(merged, shape)))

    @property
    def cell_names(self) -> tuple[str, ...]:
        """Names that `cell` answers, those made from faces included."""
        made = [name for name in MAGNETIC if name in self.faces and name not in self.cells]
        return (*self.cells, *made)

    def has(self, *names: str) -> bool:
        """Whether `cell` can give every one of these fields."""
        return all(name in self.cells or name in self.faces for name in names)

    def require(self, work: str, *names: str) -> None:
        """Raise MissingFieldError, naming the `work`, unless every field is there."""
        missing = [name for name in names if not self.has(name)]
        if missing:
            there = ", ".join(sorted(self.cell_names)) or "none"
            raise MissingFieldError(
                f"Cannot {work}: expected the fields {', '.join(names)}, got a snapshot without "
                f"{', '.join(missing)} (it has {there}); map them in a layout description."
            )

    def cell(self, name: str) -> Array:
        """Cell values of a field, (n_blocks, n_phi, n_theta, n_r); read or made when first used.

        Magnetic cell values that were not stored are the mean of the two faces.

        Raises
        ------
        MissingFieldError
            If the snapshot has no such field.
        """
        if name in self.cells:
            return self.cells[name]
        if name in self.faces:
            if name not in self._made:
                self._made[name] = _face_mean(self.faces[name], _FACE_AXIS[name] + 1)
            return self._made[name]
        raise MissingFieldError(missing_sentence(name, dict.fromkeys(self.cell_names)))

    def cell_block(self, name: str, block: int) -> Array:
        """Cell values of one block, (n_phi, n_theta, n_r); a file is read no further than that."""
        if name in self.cells:
            return self.cells.block(name, block)
        if name in self._made:
            return self._made[name][block]
        if name in self.faces:
            return _face_mean(self.faces.block(name, block), _FACE_AXIS[name])
        raise MissingFieldError(missing_sentence(name, dict.fromkeys(self.cell_names)))

    def __repr__(self) -> str:
        phi, theta, r = self.grid.block_shape
        return (
            f"Snapshot(time={self.time:.6g}, {self.grid.n_blocks} blocks of {r} x {theta} x {phi} "
            f"cells (r x theta x phi), levels {self.grid.levels}, fields: "
            f"{', '.join(self.cell_names)})"
        )


def _face_mean(faces: Array, axis: int) -> Array:
    low = [slice(None)] * faces.ndim
    high = list(low)
    low[axis], high[axis] = slice(None, -1), slice(1, None)
    return (faces[tuple(low)] + faces[tuple(high)]) * faces.dtype.type(0.5)


def _levels(blocks: Sequence[Block]) -> Array | None:
    levels = [block.level for block in blocks]
    if all(level is None for level in levels):
        return None
    if any(level is None for level in levels):
        raise GridError(
            f"Cannot build the snapshot: expected a level for every block or for none, got none "
            f"for block {levels.index(None)}; name it, or leave all out."
        )
    return np.array(levels)


def _stacked(name: str, arrays: Sequence[Array]) -> Array:
    shapes = {np.shape(array) for array in arrays}
    if len(shapes) != 1:
        raise GridError(
            f"Cannot build the snapshot: expected blocks of one shape, got {name} of shapes "
            f"{sorted(shapes)}; cut the blocks into a common size first."
        )
    return np.stack([np.asarray(array) for array in arrays])


def _stacked_fields(kind: str, mappings: Sequence[Mapping[str, Array]]) -> dict[str, Array]:
    names = list(mappings[0])
    for number, mapping in enumerate(mappings):
        if set(mapping) != set(names):
            raise FieldvizError(
                f"Cannot build the snapshot: expected the same {kind} in every block, got "
                f"{sorted(mapping)} in block {number} and {sorted(names)} in block 0."
            )
    return {name: _stacked(name, [mapping[name] for mapping in mappings]) for name in names}
