"""The commands: argument parsing only; what they do lives in `fieldviz.commands`."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Annotated, Literal

from fieldviz._version import __version__
from fieldviz.errors import FieldvizError

try:
    import cyclopts
    from cyclopts import App, Parameter
except ImportError as error:  # The base installation lives without the commands.
    raise SystemExit(
        "fieldviz: the commands need the standalone extra; install it with "
        "`pip install 'fieldviz[standalone]'`."
    ) from error

__all__ = ["app", "main"]

app = App(
    name="fieldviz",
    version=__version__,
    help="Snapshots of magnetised protoplanetary discs become pictures, VTK data and numbers.",
    result_action="return_value",
    default_parameter=Parameter(negative=()),
)

Layout = Annotated[Path | None, Parameter(name=["--layout", "-l"])]
Output = Annotated[Path | None, Parameter(name=["--output", "-o"])]


@app.command
def sample(
    output: Annotated[Path, Parameter(name=["--output", "-o"])],
    *,
    times: Annotated[tuple[float, ...], Parameter(consume_multiple=True)] = (0.0, 4.0, 8.0, 12.0),
    shape: tuple[int, int, int] = (16, 96, 160),
    wind: Literal["even", "odd", "one-sided", "through-flow"] = "even",
    levels: int = 1,
    turbulence: float = 0.5,
    wander: float = 0.02,
    side_ratio: float | None = None,
    scatter: float = 0.0,
    stretch: float = 0.0,
    precision: Literal["single", "double"] = "single",
    compress: bool = False,
    seed: int = 1,
) -> str:
    """Write a series of the invented Saltmarsh disc.

    Example: fieldviz sample -o my_disc --times 0 5 10 --wind odd

    Parameters
    ----------
    output
        Folder; it is made if need be.
    times
        Code times, 0 to 14; two sheets merge at 6.667, one splits at 7.333.
    shape
        Cells in phi, theta and r of the coarsest level.
    wind
        Parity of the wind.
    levels
        Refinement levels; each further one halves the cells nearer the midplane.
    turbulence
        rms of magnetic fluctuations over the background field; the velocity's is a tenth of that
        in sound speeds.
    wander
        By how much the sheets' radius varies with azimuth.
    side_ratio
        Mass loss of the lower side over that of the upper one; by default what the wind means.
    scatter
        rms of the azimuthal scatter of each side's mass loss.
    stretch
        0 for equal steps in theta, towards 1 for finer cells at the midplane.
    precision
        Of the stored numbers.
    compress
        Compress the files.
    seed
        Of all random numbers.
    """
    from fieldviz.commands.sample import run

    return run(
        output, times=times, shape=shape, wind=wind, levels=levels, turbulence=turbulence,
        wander=wander, side_ratio=side_ratio, scatter=scatter, stretch=stretch,
        precision=precision, compress=compress, seed=seed,
    )  # fmt: skip


@app.command
def inspect(
    file: Path, *, layout: Layout = None, as_json: Annotated[bool, Parameter("--json")] = False
) -> str:
    """Show what is in an HDF5 file; for a foreign one, propose a layout description.

    Example: fieldviz inspect run_0042.h5 > layout.toml

    Parameters
    ----------
    file
        Any HDF5 file.
    layout
        Layout description (TOML) to read it with.
    as_json
        Print JSON for programs.
    """
    from fieldviz.commands.inspect import run

    return run(file, layout, as_json)


@app.command
def render(
    file: Path,
    *,
    scene: Annotated[str, Parameter(name=["--scene", "-s"])] = "flux-sheets",
    output: Output = None,
    layout: Layout = None,
    theme: Literal["dark", "light"] = "dark",
    size: str = "1920x1080",
    quality: Literal["still", "preview"] = "still",
) -> str:
    """Draw a scene as a PNG that carries its recipe.

    Example: fieldviz render disc.h5 --scene azimuth-cut --theme light -o cut.png

    Parameters
    ----------
    file
        Snapshot.
    scene
        flux-sheets or azimuth-cut.
    output
        Name of the PNG; by default made from file, scene and theme.
    layout
        Layout description of a foreign file.
    theme
        dark for talks, light for print.
    size
        WIDTHxHEIGHT in pixels.
    quality
        still, or a faster preview.
    """
    from fieldviz.commands.render import run

    return run(
        file, scene=scene, output=output, layout=layout, theme=theme, size=size, quality=quality
    )


@app.command
def symmetry(
    files: tuple[Path, ...],
    *,
    layout: Layout = None,
    scale_heights: float = 4.0,
    thickness: float | None = None,
    r_range: tuple[float, float] | None = None,
    as_json: Annotated[bool, Parameter("--json")] = False,
) -> str:
    """Say whether the wind is even, odd or one-sided, with the numbers.

    Example: fieldviz symmetry disc.h5 --r-range 1.2 4.5

    Example: fieldviz symmetry "run/disc_*.h5" --json

    Parameters
    ----------
    files
        Snapshot, or several files, or a quoted pattern: a series.
    layout
        Layout description of a foreign file.
    scale_heights
        Height of the launching surfaces above and below the midplane, in H.
    thickness
        H/R of the disc; worked out from the snapshot by default.
    r_range
        Radii to use; all by default.
    as_json
        Print JSON for programs.
    """
    from fieldviz.commands.symmetry import run

    return run(
        files, layout=layout, scale_heights=scale_heights, thickness=thickness, r_range=r_range,
        as_json=as_json,
    )  # fmt: skip


@app.command
def sheets(
    files: tuple[Path, ...],
    *,
    layout: Layout = None,
    thickness: float | None = None,
    r_range: tuple[float, float] | None = None,
    as_json: Annotated[bool, Parameter("--json")] = False,
) -> str:
    """Find the flux sheets, and follow them through a series.

    Example: fieldviz sheets disc.h5 --r-range 1.2 4.5

    Example: fieldviz sheets "run/disc_*.h5" --json

    Parameters
    ----------
    files
        Snapshot, or several files, or a quoted pattern: a series.
    layout
        Layout description of a foreign file.
    thickness
        H/R of the disc; worked out from the snapshot by default.
    r_range
        Radii to search; all by default.
    as_json
        Print JSON for programs.
    """
    from fieldviz.commands.sheets import run

    return run(files, layout=layout, thickness=thickness, r_range=r_range, as_json=as_json)


@app.command
def outflow(
    files: tuple[Path, ...],
    *,
    layout: Layout = None,
    surface: str = "4",
    thickness: float | None = None,
    r_range: tuple[float, float] | None = None,
    as_json: Annotated[bool, Parameter("--json")] = False,
) -> str:
    """Measure what leaves each side: mass, angular momentum, energy, with budgets.

    Example: fieldviz outflow disc.h5 --surface 5 --r-range 1.5 4

    Example: fieldviz outflow disc.h5 --surface beta

    Parameters
    ----------
    files
        Snapshot, or several files, or a quoted pattern: a series.
    layout
        Layout description of a foreign file.
    surface
        Where gas is counted as leaving: a height in H; outflow (lowest height above which all gas
        leaves); slow, sonic or beta (where that number is 1); or FIELD=VALUE.
    thickness
        H/R of the disc; worked out from the snapshot by default.
    r_range
        Radii between which to count; all by default.
    as_json
        Print JSON for programs.
    """
    from fieldviz.commands.outflow import run

    return run(
        files, layout=layout, surface=surface, thickness=thickness, r_range=r_range,
        as_json=as_json,
    )  # fmt: skip


@app.command
def report(
    files: tuple[Path, ...],
    *,
    output: Annotated[Path, Parameter(name=["--output", "-o"])],
    layout: Layout = None,
    title: str | None = None,
    scenes: Annotated[bool, Parameter(negative="--no-scenes")] = True,
    keep: Path | None = None,
    processes: bool = False,
) -> str:
    """Write all numbers of a snapshot or a series as one page, with tables and pictures.

    Example: fieldviz report disc.h5 -o report

    Example: fieldviz report "run/disc_*.h5" -o report --keep numbers --processes

    Parameters
    ----------
    files
        Snapshot, or several files, or a quoted pattern: a series.
    output
        Folder for report.html, its tables as CSV, and numbers.json.
    layout
        Layout description of a foreign file.
    title
        Title of the page.
    scenes
        Draw the scenes; without them the page has its diagrams only.
    keep
        Folder for the numbers of each snapshot: a second run takes up where the first stopped.
    processes
        Measure several snapshots at once.
    """
    from fieldviz.commands.report import run

    return run(
        files, output, layout=layout, title=title, scenes=scenes, kept=keep, processes=processes
    )


@app.command
def lines(
    file: Path,
    *,
    output: Output = None,
    seeds: Literal["equal-flux", "even-area", "sheets", "wind", "points"] = "equal-flux",
    count: int = 200,
    radii: Annotated[tuple[float, ...], Parameter(consume_multiple=True)] = (),
    points: Path | None = None,
    field: Literal["magnetic", "velocity", "poloidal-velocity"] = "magnetic",
    interpolation: Literal["auto", "flux", "linear"] = "auto",
    direction: Literal["both", "forward", "backward"] = "both",
    tolerance: float = 1e-6,
    sample: Annotated[tuple[str, ...], Parameter(consume_multiple=True)] = (),
    height: float = 4.0,
    layout: Layout = None,
    as_json: Annotated[bool, Parameter("--json")] = False,
) -> str:
    """Trace field lines or streamlines and say where they end.

    Streamlines also tell of the wind on each side: invariants, critical points, lever arms.

    Example: fieldviz lines disc.h5 --seeds equal-flux --count 200 -o lines.vtp

    Example: fieldviz lines disc.h5 --seeds wind --field poloidal-velocity -o wind.vtp

    Parameters
    ----------
    file
        Snapshot.
    output
        Name ending in .vtp (VTK), .csv or .npz; without it only the summary is printed.
    seeds
        equal-flux: every line carries the same flux. even-area: also where the field is weak.
        sheets: along the flux sheets found, or at --radii. wind: by mass flux, each side apart.
    count
        Number of lines.
    radii
        Radii of the sheets; found by default.
    points
        CSV file of r,theta,phi in radians.
    field
        What to trace.
    interpolation
        auto takes flux where the magnetic field is stored on faces, else linear.
    direction
        Along the field, against it, or both.
    tolerance
        Largest error of a step over r, for linear interpolation.
    sample
        Fields to sample along the lines.
    height
        Where wind seeds lie and from where the wind is judged, in scale heights.
    layout
        Layout description of a foreign file.
    as_json
        Print JSON for programs.
    """
    from fieldviz.commands.lines import LineRequest, run

    request = LineRequest(
        seeds, count, radii, points, field, interpolation, direction, tolerance, sample, height
    )
    return run(file, output, layout=layout, request=request, as_json=as_json)


@app.command
def export(
    file: Path,
    output: Annotated[Path, Parameter(name=["--output", "-o"])],
    *,
    layout: Layout = None,
    fields: Annotated[tuple[str, ...] | None, Parameter(consume_multiple=True)] = None,
    halo: bool = False,
) -> str:
    """Write a snapshot as VTK data: NAME.vtm (XML) or NAME.vtkhdf.

    Example: fieldviz export disc.h5 -o disc.vtm --fields density magnetic_r

    Parameters
    ----------
    file
        Snapshot.
    output
        Name ending in .vtm or .vtkhdf.
    layout
        Layout description of a foreign file.
    fields
        Only these fields; all by default.
    halo
        Give each block a layer of ghost cells.
    """
    from fieldviz.commands.export import run

    return run(file, output, layout=layout, fields=fields, halo=halo)


def main(arguments: Sequence[str] | None = None) -> None:
    """Run a command; exit 0, 1 (the work failed, one line says why) or 2 (wrong call)."""
    sys.exit(_exit_code(sys.argv[1:] if arguments is None else list(arguments)))


def _exit_code(arguments: list[str]) -> int:
    try:
        result = app(arguments, exit_on_error=False, print_error=True)
        if isinstance(result, str):
            print(result, flush=True)
    except cyclopts.CycloptsError:
        return 2
    except FieldvizError as error:
        return _failed(str(error))
    except MemoryError:
        return _failed("Cannot finish: this machine's memory is used up; use a smaller snapshot.")
    except KeyboardInterrupt:
        _failed("stopped; nothing unfinished was kept under a final name")
        return 130
    except BrokenPipeError:
        # The reader of our output has gone; keep Python from complaining at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    return 0


def _failed(reason: str) -> int:
    print(f"fieldviz: {' '.join(reason.split())}", file=sys.stderr)
    return 1


host_app = App(name="host", help="The plugin for the host application.")
app.command(host_app)


@host_app.command(name="install")
def host_install(
    host: Path | None = None,
    *,
    folder: Path | None = None,
    macros: Annotated[bool, Parameter(negative="--no-macros")] = True,
) -> str:
    """Install the plugin into a folder of its own, and say how to use and to undo it.

    Example: fieldviz host install

    Example: fieldviz host install /opt/host/bin/pvpython --folder my_plugin

    Parameters
    ----------
    host
        The host's pvpython; looked for by default.
    folder
        Where to install; the user's data folder by default.
    macros
        Put buttons for finished scenes into the host's toolbar.
    """
    from fieldviz.commands.host import install

    return install(host, folder, macros=macros)


@host_app.command(name="check")
def host_check(folder: Path | None = None, *, snapshot: Path | None = None) -> str:
    """Load the installed plugin in the host, run every filter, and print what works.

    Example: fieldviz host check

    Parameters
    ----------
    folder
        Where the plugin was installed; the usual place by default.
    snapshot
        Snapshot to try it on; one of the Saltmarsh disc by default.
    """
    from fieldviz.commands.host import check

    return check(folder, snapshot)


if __name__ == "__main__":
    main()
