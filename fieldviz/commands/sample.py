"""`fieldviz sample`: write a series of the invented Saltmarsh disc."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from fieldviz.commands.progress import tracked
from fieldviz.errors import FieldvizError, SnapshotFileError
from fieldviz.snapshots.writer import write_snapshot
from fieldviz.wedge.demo import demo_disc

__all__ = ["run"]


def run(
    folder: Path,
    *,
    times: Sequence[float],
    shape: tuple[int, int, int],
    wind: str,
    levels: int,
    turbulence: float,
    wander: float,
    side_ratio: float | None,
    scatter: float,
    stretch: float,
    precision: str,
    compress: bool,
    seed: int,
) -> str:
    """Write one file per time and return what was written, a line each."""
    if not times:
        raise FieldvizError("Cannot write the sample: expected at least one time, got none.")
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise SnapshotFileError(
            f"Cannot write the sample: expected to make the folder {folder}, got "
            f"'{error.strerror}'; choose another place."
        ) from error
    written = []
    for number, time in tracked(enumerate(times), "writing snapshots", len(times)):
        disc = demo_disc(
            shape=shape,
            time=time,
            wind=wind,
            levels=levels,
            seed=seed,
            midplane_stretch=stretch,
            precision=precision,
            magnetic_turbulence=turbulence,
            velocity_turbulence=0.1 * turbulence,
            sheet_wander=wander,
            side_ratio=side_ratio,
            wind_scatter=scatter,
        )
        path = folder / f"saltmarsh_{number:03d}.h5"
        write_snapshot(path, disc, compress=compress)
        written.append(f"{path}   t = {time:g}, {disc.grid.n_cells:,} cells")
    return "\n".join(written)
