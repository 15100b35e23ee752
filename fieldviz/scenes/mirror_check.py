"""The scene mirror-check: the reflected lower side beside the upper one, and the verdict."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from matplotlib.colors import Colormap

from fieldviz.derived.azimuth_sums import AzimuthMoments, azimuth_moments
from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.scenes.composition import ColourBar
from fieldviz.scenes.from_data import power_law_exponent, robust_range, round_figure
from fieldviz.scenes.panels import Fan, FlatComposition, PanelRow
from fieldviz.scenes.settings import MirrorCheck
from fieldviz.scenes.theme import Theme
from fieldviz.scenes.wording import even_ticks, number_text, power_text, scaled
from fieldviz.symmetry.field_scores import FieldScore
from fieldviz.symmetry.mirror import MIRROR_SIGNS
from fieldviz.symmetry.pairs import Pair
from fieldviz.symmetry.verdict import short_error
from fieldviz.symmetry.wind_symmetry import Symmetry, wind_symmetry
from fieldviz.wedge.snapshot import Snapshot
from fieldviz.wedge.typing import Array

__all__ = ["compose_mirror_check"]

_QUANTITIES = ("velocity_r", "magnetic_phi")
_SYMBOLS = {"velocity_r": r"$v_r$", "magnetic_phi": r"$B_\phi$"}
_ABSENT = {
    "velocity_r": "no radial velocity in this snapshot: no $v_r$",
    "magnetic_phi": "no azimuthal field in this snapshot: no $B_\\phi$",
}
_MOST_ROWS = 240  # of angles at which both sides are compared
_STEPS = (0.25, 0.5, 1.0, 2.0)  # ends of the difference's colours over the quantity's
_LEAST_REACH = np.radians(2.0)


@dataclass(frozen=True)
class _Sides:
    """A compensated quantity on both sides at equal angles, (n_angle, n_r)."""

    name: str
    upper: Array
    reflected: Array
    label: str
    factor: float


def compose_mirror_check(
    snapshot: Snapshot, scene: MirrorCheck, theme: Theme, nodes: int
) -> FlatComposition:
    """Compare both sides of a snapshot's azimuth means.

    Parameters
    ----------
    snapshot : Snapshot
        With velocity_r, magnetic_phi, or both; density and the whole velocity for the verdict; what
        is missing is named.
    scene : MirrorCheck
    theme : Theme
    nodes : int
        Not used: panels have the pixels they need.

    Returns
    -------
    FlatComposition

    Raises
    ------
    MissingFieldError
        Without both quantities.
    FieldvizError
        If the wedge has one side only.
    """
    del nodes
    names = tuple(name for name in _QUANTITIES if snapshot.has(name))
    if not names:
        there = ", ".join(sorted(snapshot.cell_names)) or "no field"
        raise MissingFieldError(
            "Cannot draw the mirror check: expected velocity_r or magnetic_phi, got a snapshot "
            f"with {there}; map them in a layout description."
        )
    reach = _common_reach(snapshot)
    moments = azimuth_moments(snapshot, volume=names)
    r, use = _columns(moments, scene.outer_radius)
    angle = np.linspace(0.0, reach, min(len(moments.mesh.theta), _MOST_ROWS) + 1)
    symmetry, reason = _verdict(snapshot, scene)
    rows, drawn = [], {}
    for name in names:
        sides = _sides(snapshot, scene, moments, name, angle, r, use)
        row, limit = _row(sides, scene, angle, r, symmetry, theme)
        rows.append(row)
        drawn[f"{name}_limit"] = limit
    return FlatComposition(
        title="Mirror check" if symmetry is None else f"Mirror check: {_named(symmetry.word)}",
        subtitle=reason if symmetry is None else _meaning(symmetry)[0],
        findings=[] if symmetry is None else [_finding(pair) for pair in symmetry.pairs],
        rows=rows,
        caption=_caption(snapshot, names, symmetry, moments, reach),
        drawn=drawn if symmetry is None else drawn | {"word": symmetry.word},
    )


# ---- numbers ------------------------------------------------------------------------------------


def _common_reach(snapshot: Snapshot) -> float:
    low, high = snapshot.grid.theta_range
    reach = min(0.5 * np.pi - low, high - 0.5 * np.pi)
    if reach < _LEAST_REACH:
        raise FieldvizError(
            "Cannot draw the mirror check: expected a wedge with both sides of the midplane, got "
            f"{np.degrees(0.5 * np.pi - low):.3g} degrees above and "
            f"{np.degrees(high - 0.5 * np.pi):.3g} below."
        )
    return float(reach)


def _columns(moments: AzimuthMoments, r_end: float | None) -> tuple[Array, np.ndarray]:
    r = moments.mesh.r
    use = r > 0 if r_end is None else (r > 0) & (r <= r_end)
    if np.count_nonzero(use) < 2:
        raise FieldvizError(
            f"Cannot draw the mirror check: expected an outer_radius beyond {r[1]:.4g}, got "
            f"{r_end}."
        )
    return r[use], use


def _verdict(snapshot: Snapshot, scene: MirrorCheck) -> tuple[Symmetry | None, str]:
    """The verdict on the wind, or why there is none."""
    try:
        return wind_symmetry(snapshot, scale_heights=scene.scale_heights), ""
    except MissingFieldError as error:
        lacking = str(error).partition("without ")[2].partition(" (")[0]
        return None, f"no verdict on the wind: the snapshot lacks {lacking}"
    except FieldvizError as error:
        return None, f"no verdict on the wind: {str(error).partition(': ')[2].rstrip('.')}"


def _sides(
    snapshot: Snapshot,
    scene: MirrorCheck,
    moments: AzimuthMoments,
    name: str,
    angle: Array,
    r: Array,
    use: np.ndarray,
) -> _Sides:
    table, mesh = moments.means[name], moments.mesh
    both = [
        np.array([mesh.at_theta(table, 0.5 * np.pi + way * a) for a in angle])[:, use]
        for way in (-1, 1)
    ]
    R = r * np.cos(angle)[:, None]
    if name == "velocity_r":
        power, factor, label = np.sqrt(R / snapshot.gm), 1.0, r"$v_r/v_{\rm K}$"
    else:
        b = scene.field_exponent
        if b is None:
            rms = np.sqrt(np.nanmean(np.square(both), axis=(0, 1)))
            b = power_law_exponent(r, rms)
        power = R**b
        factor, unit = scaled(float(np.nanpercentile(np.abs(both * power), 99)))
        label = rf"$B_\phi{power_text('R', b)}$ [{unit}]"
    return _Sides(name, both[0] * power, MIRROR_SIGNS[name] * both[1] * power, label, factor)


def _row(
    sides: _Sides,
    scene: MirrorCheck,
    angle: Array,
    r: Array,
    symmetry: Symmetry | None,
    theme: Theme,
) -> tuple[PanelRow, float]:
    signed = sides.name == "magnetic_phi"
    every = np.concatenate([sides.upper, sides.reflected])
    given = scene.field_limit if signed else scene.speed_limit
    limits = _limits(every, signed, given)
    largest = max(abs(limits[0]), abs(limits[1]))
    difference = sides.upper - sides.reflected
    typical = robust_range(np.abs(difference), 0.0, 98.0)[1]
    step = next((step for step in _STEPS if typical <= step * largest), _STEPS[-1])
    apart = step * largest
    colours = theme.colour_map("signed_field") if signed else theme.signed_speed(limits)
    turned = "" if MIRROR_SIGNS[sides.name] > 0 else ", sign turned"
    lower = (f"lower side, reflected{turned}", "lower, reflected", "lower")
    label = sides.label.partition(" [")[0]
    return PanelRow(
        _SYMBOLS[sides.name],
        Fan(r, angle, sides.upper, ("upper side", "upper", "upper"), True, signed),
        Fan(r, angle, sides.reflected, lower, zero_line=signed),
        Fan(r, angle, difference, ("upper minus reflected", "difference")),
        _bar(sides.label, colours, limits, sides.factor),
        _bar(
            f"difference of {label}",
            theme.colour_map("difference"),
            (-apart, apart),
            sides.factor,
        ),
        _words(symmetry, sides.name),
    ), limits[1]


def _limits(values: Array, signed: bool, given: float | None) -> tuple[float, float]:
    low, high = robust_range(values, 1.0, 99.0)
    if signed:
        high = max(abs(low), abs(high)) if given is None else given
        return -round_figure(high), round_figure(high)
    high = round_figure(max(high, 1e-12)) if given is None else given
    # Gas that falls in needs colours of its own only where there is much of it.
    return (round_figure(low) if low < -0.1 * high else 0.0), high


def _bar(label: str, colours: Colormap, limits: tuple[float, float], factor: float) -> ColourBar:
    low, high = limits
    ticks = [(at * factor, text) for at, text in even_ticks(low / factor, high / factor, 4)]
    return ColourBar(label, colours, limits, ticks)


# ---- words --------------------------------------------------------------------------------------


def _named(word: str) -> str:
    return f"{word} wind" if word in ("even", "odd", "mixed") else word


def _meaning(symmetry: Symmetry) -> tuple[str, list[str]]:
    """What the verdict means, and what its sentence adds to word and angles."""
    meaning, _, rest = symmetry.sentence.partition(" (")
    return meaning.partition(": ")[2], rest.rstrip(")").split("; ")[1:]


def _score(symmetry: Symmetry | None, name: str) -> FieldScore | None:
    if symmetry is None or symmetry.field_scores is None:
        return None
    found = [score for score in symmetry.field_scores.scores if score.name == name]
    return found[0] if found and np.isfinite(found[0].score) else None


def _words(symmetry: Symmetry | None, name: str) -> list[tuple[str, float, bool, bool]]:
    """Shares of the even and odd part of the azimuth mean, and the score of the full field."""
    score = _score(symmetry, name)
    if score is None:
        return [("no score", 24.0, False, True)]
    even = 0.5 * (1 + score.score)
    first = even >= 0.5
    return [
        (f"{_percent(even)} even", 38.0 if first else 28.0, first, not first),
        (f"{_percent(1 - even)} odd", 28.0 if first else 38.0, not first, first),
        (f"score {_signed(score.score, 2)}", 22.0, False, True),
        (f"with turbulence {_signed(score.full_score, 2)}", 22.0, False, True),
    ]


def _percent(share: float) -> str:
    percent = 100 * share
    near_an_end = min(percent, 100 - percent) < 9.95
    return f"{percent:.1f} %" if near_an_end else f"{percent:.0f} %"


def _signed(value: float, digits: int) -> str:
    return f"{round(value, digits) + 0.0:+.{digits}f}".replace("-", "\N{MINUS SIGN}")


def _finding(pair: Pair) -> str:
    """Angle, error and word of one pair."""
    if not np.isfinite(pair.angle):
        return f"{pair.name}: {pair.word}"
    error = " (no error estimate)"
    if pair.angle_error is not None:
        error = f" ± {short_error(pair.angle_error)}°"
    return f"{pair.name} {_signed(pair.angle, 1)}°{error}: {pair.word}"


def _caption(
    snapshot: Snapshot,
    names: tuple[str, ...],
    symmetry: Symmetry | None,
    moments: AzimuthMoments,
    reach: float,
) -> list[str]:
    phrases = [
        "azimuth means about the midplane, up to "
        f"{number_text(round(float(np.degrees(reach)), 1))}° on both sides"
    ]
    if symmetry is not None:
        phrases.append("shares of the squared mean beyond 2 H, weighted by mass flux")
        phrases.append(
            "angles: 0° alike, \N{MINUS SIGN}45° upper only, +45° lower only, ±90° opposite; "
            "one standard error"
        )
        phrases += _meaning(symmetry)[1]
    if "magnetic_phi" in names:
        phrases.append(r"even: as in a mirror, which turns the sign of $B_\phi$")
    phrases += [_ABSENT[name] for name in _QUANTITIES if name not in names]
    holes = sum(int(np.count_nonzero(~np.isfinite(moments.means[name]))) for name in names)
    if holes:
        phrases.append(f"{holes} places without a number left out")
    return phrases
