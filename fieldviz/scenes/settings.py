"""The five scenes: plain settings, each with a default. None means taken from the data."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from fieldviz.errors import RenderError

__all__ = ["AzimuthCut", "CurrentSheetView", "FluxSheets", "MirrorCheck", "OutflowView", "Scene"]


@dataclass(frozen=True)
class AzimuthCut:
    """The wedge opened at constant azimuth.

    Attributes
    ----------
    cut_azimuth : float or None
        Azimuth of the wall, degrees. None: the end of the wedge.
    sector : float
        Azimuth from the near edge to the wall, degrees.
    opened_share : float
        Share of the sector whose upper half is taken away, 0.1 to 0.9.
    outer_radius : float or None
        Radius at which the picture ends, code length. None: the whole wedge.
    line_count : int
        Poloidal field lines, equal flux between neighbours.
    surface_level : float
        Density of the disc's body over that of the midplane at the same radius.
    density_exponent, field_exponent : float or None
        a and b in rho R^a and B_z R^b. None: fitted to the midplane, to the nearest quarter.
    field_limit : float or None
        Upper end of the colours of B_z R^b, code units. None: a high percentile.
    density_limits : (float, float) or None
        Ends of the colours of log10 density, code units. None: percentiles.
    camera_azimuth, camera_height : float
        Direction of the camera from the near edge of the sector and above the midplane, degrees.
    """

    scene: ClassVar[str] = "azimuth-cut"

    cut_azimuth: float | None = None
    sector: float = 45.0
    opened_share: float = 0.42
    outer_radius: float | None = None
    line_count: int = 26
    surface_level: float = 0.1
    density_exponent: float | None = None
    field_exponent: float | None = None
    field_limit: float | None = None
    density_limits: tuple[float, float] | None = None
    camera_azimuth: float = -60.0
    camera_height: float = 19.0

    def __post_init__(self) -> None:
        _check_range(self, "sector", 5.0, 180.0)
        _check_range(self, "opened_share", 0.1, 0.9)
        _check_range(self, "line_count", 1, 400)
        _check_range(self, "surface_level", 1e-8, 0.99)
        _check_range(self, "camera_height", -89.0, 89.0)
        _check_limits(self, "density_limits")


@dataclass(frozen=True)
class FluxSheets:
    """Nested surfaces of constant B_z R^b in a ring whose front is taken away.

    Attributes
    ----------
    shown_azimuth : float
        Azimuth of the ring that is shown, degrees; the rest is taken away in front.
    outer_level, inner_level : float or None
        B_z R^b of the translucent and of the opaque surface, code units. None: from the median
        and the peaks on the midplane.
    height_limit : float
        The translucent surfaces end at abs(z)/R of this value.
    inner_height_limit : float
        The opaque surfaces end at abs(z)/R of this value, so that both are seen from above.
    line_count : int
        Field lines along the sheets over the shown azimuth, about; 0 for none.
    line_height_limit : float
        Field lines end at abs(z)/R of this value.
    surface_level : float
        Density of the disc's surface over that of the midplane at the same radius.
    outer_radius : float or None
        Radius at which the picture ends, code length. None: the whole wedge.
    density_exponent, field_exponent : float or None
        a and b in rho R^a and B_z R^b. None: fitted to the midplane, to the nearest quarter.
    density_limits : (float, float) or None
        Ends of the colours of log10 density, code units. None: percentiles.
    camera_azimuth, camera_height : float
        Direction of the camera from the middle of the opening and above the midplane, degrees.
    """

    scene: ClassVar[str] = "flux-sheets"

    shown_azimuth: float = 270.0
    outer_level: float | None = None
    inner_level: float | None = None
    height_limit: float = 0.5
    inner_height_limit: float = 0.3
    line_count: int = 72
    line_height_limit: float = 0.8
    surface_level: float = 0.1
    outer_radius: float | None = None
    density_exponent: float | None = None
    field_exponent: float | None = None
    density_limits: tuple[float, float] | None = None
    camera_azimuth: float = 6.0
    camera_height: float = 28.0

    def __post_init__(self) -> None:
        _check_range(self, "shown_azimuth", 20.0, 360.0)
        _check_range(self, "height_limit", 0.02, 10.0)
        _check_range(self, "inner_height_limit", 0.02, 10.0)
        _check_range(self, "line_count", 0, 2000)
        _check_range(self, "line_height_limit", 0.02, 10.0)
        _check_range(self, "surface_level", 1e-8, 0.99)
        _check_range(self, "camera_height", -89.0, 89.0)
        _check_limits(self, "density_limits")


@dataclass(frozen=True)
class OutflowView:
    """The disc in the middle, and streamlines of its wind above and below.

    Attributes
    ----------
    line_count : int
        Streamlines over the whole ring, about, in proportion to the mass that leaves; 0 for none.
    launch_height : float or None
        Lines begin on cones this many H above and below the midplane. None: the lowest height
        through which nearly all of the largest loss passes.
    surface_level : float
        Density of the disc's surface over that of the midplane at the same radius.
    outer_radius : float or None
        Radius at which the picture ends, code length. None: the whole wedge.
    opened_azimuth : float
        Azimuth over which the disc is taken away in front, degrees; 0 for a whole ring.
    critical : bool
        Show the Alfven surface behind the star.
    speed_limit : float or None
        Upper end of the colours of speed over the Kepler speed. None: a high percentile.
    density_exponent : float or None
        a in rho R^a. None: fitted to the midplane, to the nearest quarter.
    density_limits : (float, float) or None
        Ends of the colours of log10 density, code units. None: percentiles.
    camera_azimuth, camera_height : float
        Direction of the camera and its height above the midplane, degrees.
    """

    scene: ClassVar[str] = "outflow"

    line_count: int = 96
    launch_height: float | None = None
    surface_level: float = 0.1
    outer_radius: float | None = None
    opened_azimuth: float = 100.0
    critical: bool = True
    speed_limit: float | None = None
    density_exponent: float | None = None
    density_limits: tuple[float, float] | None = None
    camera_azimuth: float = -90.0
    camera_height: float = 10.0

    def __post_init__(self) -> None:
        _check_range(self, "line_count", 0, 2000)
        _check_range(self, "opened_azimuth", 0.0, 340.0)
        if self.launch_height is not None:
            _check_range(self, "launch_height", 0.1, 100.0)
        _check_range(self, "surface_level", 1e-8, 0.99)
        _check_range(self, "camera_height", -89.0, 89.0)
        _check_limits(self, "density_limits")


@dataclass(frozen=True)
class MirrorCheck:
    """The upper side and the reflected lower side back to back, and their difference.

    Attributes
    ----------
    outer_radius : float or None
        Radius at which the picture ends, code length. None: the whole wedge.
    scale_heights : float
        Height in H of the surfaces that the verdict on the wind rests on.
    field_exponent : float or None
        b in B_phi R^b. None: fitted, to the nearest quarter.
    speed_limit, field_limit : float or None
        Upper end of the colours of v_r/v_K and of B_phi R^b. None: a high percentile.
    """

    scene: ClassVar[str] = "mirror-check"

    outer_radius: float | None = None
    scale_heights: float = 4.0
    field_exponent: float | None = None
    speed_limit: float | None = None
    field_limit: float | None = None

    def __post_init__(self) -> None:
        _check_range(self, "scale_heights", 0.1, 100.0)


@dataclass(frozen=True)
class CurrentSheetView:
    """The surface where B_phi changes sign, coloured by current, and its sections.

    Attributes
    ----------
    shown_azimuth : float
        Azimuth that is shown, degrees; the rest is taken away in front.
    height_limit : float or None
        Sections end at abs(z)/R of this value. None: 4.5 H, within the wedge.
    line_count : int
        Field lines through the sheet over the shown azimuth, about; 0 for none.
    line_height_limit : float or None
        Field lines end at abs(z)/R of this value. None: 1.5 times that of the
        sections.
    outer_radius : float or None
        Radius at which the picture ends, code length. None: the whole wedge.
    current_exponent : float or None
        c in abs(J) R^c. None: one more than that of B_z on the midplane.
    current_limit : float or None
        Upper end of the colours of abs(J) R^c, code units. None: a high percentile.
    camera_azimuth, camera_height : float
        Direction of the camera from the middle of the opening and above the midplane, degrees.
    """

    scene: ClassVar[str] = "current-sheet"

    shown_azimuth: float = 225.0
    height_limit: float | None = None
    line_count: int = 40
    line_height_limit: float | None = None
    outer_radius: float | None = None
    current_exponent: float | None = None
    current_limit: float | None = None
    camera_azimuth: float = 6.0
    camera_height: float = 30.0

    def __post_init__(self) -> None:
        _check_range(self, "shown_azimuth", 20.0, 360.0)
        _check_range(self, "line_count", 0, 2000)
        for name in ("height_limit", "line_height_limit"):
            if getattr(self, name) is not None:
                _check_range(self, name, 0.02, 10.0)
        _check_range(self, "camera_height", -89.0, 89.0)


Scene = FluxSheets | OutflowView | AzimuthCut | MirrorCheck | CurrentSheetView


def _check_range(scene: object, name: str, low: float, high: float) -> None:
    value = getattr(scene, name)
    if not low <= value <= high:
        raise RenderError(
            f"Cannot use this scene: expected {name} between {low:g} and {high:g}, got {value}."
        )


def _check_limits(scene: object, name: str) -> None:
    limits = getattr(scene, name)
    if limits is not None and not limits[0] < limits[1]:
        raise RenderError(
            f"Cannot use this scene: expected {name} as two increasing numbers, got {limits}."
        )
