"""Finding flux sheets: the Saltmarsh disc, bells of known width, and all that may be odd."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.signal import find_peaks
from scipy.special import ndtr
from sheet_fields import FWHM, H, bells, of_sheets, vertical

import fieldviz as fv
from fieldviz.errors import FieldvizError, MissingFieldError
from fieldviz.sheets.criteria import SheetCriteria
from fieldviz.sheets.flux_map import MIDPLANE, flux_maps
from fieldviz.sheets.flux_profile import flux_profile
from fieldviz.sheets.flux_sheets import find_flux_sheets
from fieldviz.sheets.running import gaussian_kernel, row_medians, running_median
from fieldviz.wedge.demo.state import disc_state
from fieldviz.wedge.geometry import centres

SHAPE = (4, 96, 128)
TWO = [(1.6, 8.0, 0.25), (2.6, 5.0, 0.3)]


def away(found, true):
    """Distances in scale heights of sheets from the radii they should be at."""
    assert len(found) == len(true)
    return np.log(np.array([s.radius for s in found]) / np.array(true)) / H


def same(one, other, rtol=1e-9):
    """Every number of two lists of sheets."""
    assert len(one) == len(other)
    names = "radius width inner outer flux share peak background field beta_z depletion wander"
    for a, b in zip(one, other, strict=True):
        for name in names.split():
            # What is zero up to rounding has no relative error.
            np.testing.assert_allclose(
                getattr(a, name), getattr(b, name), rtol=rtol, atol=1e-12, err_msg=name
            )
        assert a.flags == b.flags


# ---- the Saltmarsh disc ---------------------------------------------------------------------


@pytest.mark.parametrize(
    ("wind", "time"), [("even", 0.0), ("one-sided", 3.0), ("through-flow", 11.0)]
)
def test_every_sheet_of_the_disc_within_a_twentieth_of_a_scale_height(wind, time, small_disc):
    law = fv.SaltmarshDisc(wind=wind, time=time)
    found = find_flux_sheets(small_disc(shape=SHAPE, wind=wind, time=time))
    assert np.abs(away(found, law.sheet_radii())).max() < 0.05
    assert not found.patches
    assert [s.radius for s in found] == sorted(s.radius for s in found)


def test_the_slanted_disc_in_a_thin_band(small_disc):
    """Lines that lean smear sheets over the band; a thin one sees them as they are."""
    found = find_flux_sheets(small_disc(shape=SHAPE, wind="odd"), band=0.1)
    assert np.abs(away(found, fv.SaltmarshDisc(wind="odd").sheet_radii())).max() < 0.05
    assert [s.tilt for s in found] == pytest.approx([0.75] * 5, abs=0.01)


@pytest.mark.parametrize("noise", [0.5, 1.0])
def test_noise_as_strong_as_the_background_makes_no_sheets(noise):
    """20 seeds: none false; where noise moves the maximum of the closed form the sheet moves."""
    true = np.unique(fv.SaltmarshDisc().sheet_radii())
    missed, moved = 0, []
    for seed in range(1, 21):
        law = fv.SaltmarshDisc(field_noise=noise, seed=seed)
        disc = fv.demo_disc(shape=(1, 48, 128), field_noise=noise, seed=seed)
        radii = np.array([s.radius for s in find_flux_sheets(disc, thickness=H, lean=False)])
        apart = np.abs(np.log(radii[:, None] / true)) / H
        assert apart.min(1).max() < 0.3, "a false sheet"
        missed += int((apart.min(0) > 0.3).sum())
        R = np.linspace(1.01, 4.99, 8001)
        maxima = R[find_peaks(np.gradient(law.midplane_flux_function(R), R))[0]]
        nearest = maxima[np.abs(maxima[:, None] - radii).argmin(0)]
        moved += list(np.log(radii / nearest) / H)
    assert missed <= (0 if noise < 1 else 2)
    assert np.sqrt(np.mean(np.square(moved))) < 0.05


def test_maxima_are_those_scipy_finds_in_the_closed_form(small_disc):
    law = fv.SaltmarshDisc(time=2.0)
    R = np.linspace(1.01, 4.99, 40001)
    f = law.radial_flux_density(R)
    peaks = R[find_peaks(f, prominence=0.5 * np.median(f))[0]]
    found = find_flux_sheets(small_disc(shape=(1, 96, 256), time=2.0), band=0.05, smoothing=0)
    assert np.abs(away(found, peaks)).max() < 0.005


def test_numbers_of_a_sheet_against_closed_forms(small_disc):
    law = fv.SaltmarshDisc(time=10.0)
    found = find_flux_sheets(small_disc(shape=(1, 96, 256), time=10.0), band=0.1, smoothing=0.1)
    for s in found:
        assert s.flux == pytest.approx(law.flux(*s.limits), rel=2e-3)
        assert s.share == pytest.approx(s.flux / law.flux(1, 5), rel=1e-9)
        B_z = float(law.radial_flux_density(np.array(s.radius))) / s.radius
        assert s.field == pytest.approx(B_z, rel=0.02)
        pressure = float(disc_state(law, np.array(s.radius), np.array(np.pi / 2)).pressure)
        assert s.beta_z == pytest.approx(2 * pressure / B_z**2, rel=0.05)
    alone = [s.width for s in found if min(abs(s.radius - R) for R in (1.4, 2.0, 4.2)) < 0.05]
    assert alone == pytest.approx([0.25 * FWHM] * 3, rel=0.04)
    for a, b in pairwise(found):
        assert a.separation == pytest.approx(
            2 * (b.radius - a.radius) / (a.radius + b.radius) / found.h
        )
    gaps = [(a.limits[1], b.limits[0]) for a, b in pairwise(found)]
    for s, (r1, r2) in zip(found, gaps, strict=False):
        if s.flux_between is not None:
            assert s.flux_between == pytest.approx(law.flux(r1, r2), rel=5e-3)
            area = (r2**2 - r1**2) / 2 * law.period
            assert s.field_between == pytest.approx(s.flux_between / area)
    assert found[-1].separation is None
    assert found[-1].flux_between is None


def test_tilt_and_bending_are_those_of_the_field_line(small_disc):
    """The ridge follows the line of its footpoint; the parabola is fitted to the same heights."""
    law = fv.SaltmarshDisc()
    for s in find_flux_sheets(small_disc(shape=(1, 128, 256))):
        R_f = min(law.sheet_radii(), key=lambda R: abs(R - s.radius))
        angle = np.arctan(s.heights * H)
        line = R_f / law.footpoint_factor(np.pi / 2 - angle) * np.cos(angle)
        off = s.heights != 0  # there R is that of the band
        np.testing.assert_allclose(s.radii[off], line[off], rtol=1e-3)
        fit = np.polynomial.polynomial.polyfit(s.heights * H * line / R_f, line / R_f, 2)
        assert s.bending == pytest.approx(2 * fit[2], abs=0.2)
        assert s.tilt == pytest.approx(0, abs=1e-10)


# ---- symmetries and divisions ---------------------------------------------------------------


def test_reversed_field(small_disc):
    one = find_flux_sheets(small_disc(shape=SHAPE))
    other = find_flux_sheets(small_disc(shape=SHAPE, reversed_field=True))
    assert one.total_flux == -other.total_flux
    assert len(one) == len(other) == 5
    for a, b in zip(one, other, strict=True):
        assert (a.polarity, b.polarity) == (1, -1)
        for name in ("radius", "width", "share", "contrast", "beta_z", "depletion"):
            assert getattr(a, name) == pytest.approx(getattr(b, name), rel=1e-12), name
        for name in ("flux", "field", "peak", "background"):
            assert getattr(a, name) == pytest.approx(-getattr(b, name), rel=1e-12), name
        assert a.flags == b.flags
    assert one.relation.pearson == pytest.approx(other.relation.pearson, abs=1e-12)


def test_mirror(small_disc):
    """Turned upside down (B is an axial vector) only the tilt changes its sign."""
    disc = small_disc(shape=SHAPE, wind="odd")
    faces = {"magnetic_theta": np.flip(disc.faces["magnetic_theta"], axis=2)}
    cells = {n: np.flip(disc.cell(n), axis=2) for n in ("density", "pressure")}
    upside = fv.Snapshot.from_grid(disc.grid, faces=faces, cells=cells)
    one, other = (find_flux_sheets(s, band=0.1) for s in (disc, upside))
    same(one, other)
    for a, b in zip(one, other, strict=True):
        assert a.tilt == pytest.approx(-b.tilt, rel=1e-9)
        assert a.bending == pytest.approx(b.bending, rel=1e-6, abs=1e-9)


def test_rotation_by_whole_cells(small_disc):
    disc = small_disc(shape=(16, 32, 128), sheet_wander=0.05)
    faces = {"magnetic_theta": np.roll(disc.faces["magnetic_theta"], 5, axis=1)}
    cells = {n: np.roll(disc.cell(n), 5, axis=1) for n in ("density", "pressure")}
    turned = fv.Snapshot.from_grid(disc.grid, faces=faces, cells=cells)
    one, other = find_flux_sheets(disc), find_flux_sheets(turned)
    same(one, other)
    for a, b in zip(one, other, strict=True):
        np.testing.assert_allclose(np.roll(a.ridge.radius, 5), b.ridge.radius, rtol=1e-12)


def test_cut_into_blocks(small_disc):
    settings = {"shape": (8, 48, 96), "sheet_wander": 0.05}
    one = find_flux_sheets(small_disc(**settings))
    same(one, find_flux_sheets(small_disc(**settings, blocks=(2, 4, 3))))
    same(one, find_flux_sheets(small_disc(**settings, blocks=(4, 1, 2))))


def test_two_levels(small_disc):
    """The midplane is refined: the same as one fine level, as no coarse cell meets the band."""
    fine = find_flux_sheets(small_disc(shape=(4, 96, 128)), lean=False)
    mixed = find_flux_sheets(small_disc(shape=(2, 48, 64), levels=2), lean=False)
    # Columns reach into the coarse cells above.
    for a, b in zip(fine, mixed, strict=True):
        assert a.radius == pytest.approx(b.radius, rel=1e-12)
        assert a.flux == pytest.approx(b.flux, rel=1e-12)
        assert a.depletion == pytest.approx(b.depletion, rel=0.02)


def test_a_level_jump_within_the_midplane():
    """Half of the radii at twice the resolution: sheets on both sides and across the jump."""
    theta, phi = np.pi / 2 + np.linspace(-0.3, 0.3, 9), np.linspace(0, 0.4, 5)
    r = np.geomspace(1, 5, 129)

    def block(r, theta, phi, level):
        face = -np.diff(bells(r, [(2.24, 8, 0.3), *TWO])) / np.diff(r**2 / 2)
        shape = (len(phi) - 1, len(theta), len(r) - 1)
        field = np.broadcast_to(face / np.sin(theta)[:, None], shape)
        return fv.Block(r, theta, phi, faces={"magnetic_theta": field}, level=level)

    fine_r = np.geomspace(r[64], 5, 129)
    blocks = [block(r[:65], theta, phi, 0)]
    for i in range(2):
        for t in (theta[:5], theta[4:]):
            for p in (phi[:3], phi[2:]):
                half = [np.linspace(e[0], e[-1], 2 * len(e) - 1) for e in (t, p)]
                blocks.append(block(fine_r[64 * i : 64 * i + 65], *half, 1))
    found = find_flux_sheets(fv.Snapshot.from_blocks(blocks), thickness=H)
    assert np.abs(away(found, [1.6, 2.24, 2.6])).max() < 0.01
    assert [s.width for s in found] == pytest.approx(
        [0.25 * FWHM, 0.3 * FWHM, 0.3 * FWHM], rel=0.08
    )


def test_a_level_jump_at_the_midplane():
    """Fine above, coarse below: on the midplane the fine faces count, in the band both."""
    r, phi = np.geomspace(1, 5, 257), np.linspace(0, 0.4, 5)
    theta = np.pi / 2 + np.linspace(-0.4, 0.4, 17)

    def block(r, theta, phi, level):
        face = -np.diff(bells(r, TWO)) / np.diff(r**2 / 2)
        shape = (len(phi) - 1, len(theta), len(r) - 1)
        field = np.broadcast_to(face / np.sin(theta)[:, None], shape)
        return fv.Block(r, theta, phi, faces={"magnetic_theta": field}, level=level)

    above = [
        block(r[128 * i :][:129], theta[4 * j :][:5], phi[2 * k :][:3], 1)
        for i in (0, 1)
        for j in (0, 1)
        for k in (0, 1)
    ]
    below = block(r[::2], np.linspace(np.pi / 2, theta[-1], 5), phi[::2], 0)
    snapshot = fv.Snapshot.from_blocks([*above, below])
    profile, of_band = flux_profile(snapshot, thickness=H)
    np.testing.assert_allclose(profile.midplane.mean(), np.diff(bells(r, TWO)) / np.diff(r))
    coarse = np.repeat(np.diff(bells(r[::2], TWO)) / np.diff(r[::2]), 2)
    # B_z is even within a coarse cell, so f grows as r in it.
    middles, of_coarse = centres(r), np.repeat(centres(r[::2]), 2)
    both = 0.5 * (np.diff(bells(r, TWO)) / np.diff(r) + coarse * middles / of_coarse)
    np.testing.assert_allclose(of_band.mean(), both, rtol=1e-9)
    assert np.abs(away(find_flux_sheets(snapshot, thickness=H), [1.6, 2.6])).max() < 0.01


def test_one_azimuth_is_the_mean_of_many(small_disc):
    one = find_flux_sheets(small_disc(shape=(1, 96, 128)))
    same(one, find_flux_sheets(small_disc(shape=(8, 96, 128))))
    assert any("too few for ridges" in note for note in one.notes)
    assert all(s.coverage == 1 and s.wander < 1e-12 for s in one)


def test_cell_values_alone(small_disc):
    disc = small_disc(shape=(2, 96, 128))
    cells = {n: disc.cell(n) for n in ("density", "pressure", "magnetic_theta")}
    bare = find_flux_sheets(fv.Snapshot.from_grid(disc.grid, cells=cells))
    assert "interpolated to faces" in bare.notes[1]
    for a, b in zip(bare, find_flux_sheets(disc), strict=True):
        assert a.radius == pytest.approx(b.radius, rel=1e-3)
        assert a.flux == pytest.approx(b.flux, rel=0.01)


def test_single_precision(small_disc):
    one, other = (
        find_flux_sheets(small_disc(shape=(2, 48, 128), precision=p)) for p in ("single", "double")
    )
    same(one, other, rtol=1e-4)


# ---- fields made to measure -----------------------------------------------------------------


@settings(max_examples=10)
@given(
    st.floats(0.2, 0.45), st.floats(4.0, 30.0), st.floats(1.5, 3.3), st.sampled_from([-2.5, 1, 7])
)
def test_radius_width_and_flux_of_a_bell(sd, height, radius, strength):
    """FWHM without the smoothing, position and flux of a lone bell of any strength and sign."""
    made = vertical(lambda r, _: strength * bells(r, [(radius, height, sd)]))
    (s,) = find_flux_sheets(made, thickness=H, lean=False, smoothing=0.1)
    assert s.polarity == np.sign(strength)
    assert np.log(s.radius / radius) / H == pytest.approx(0, abs=0.02)
    assert s.width == pytest.approx(sd * FWHM, rel=0.03)
    r1, r2 = s.limits
    true = strength * np.pi / 4 * np.diff(bells(np.array([r1, r2]), [(radius, height, sd)]))[0]
    assert s.flux == pytest.approx(true, rel=2e-3)
    # A Gaussian returns to a tenth of its height at 2.146 sd (of the smoothed one).
    reach = np.sqrt(-2 * np.log(0.1)) * np.hypot(sd, 0.1) * H * radius
    assert r2 - r1 == pytest.approx(2 * reach, rel=0.03)
    # The flanks of a wide bell lift the median, so that its contrast comes out too low.
    assert 0.85 < s.contrast / (1 + height * sd / np.hypot(sd, 0.1)) < 1.01


def test_width_flag_and_smoothing():
    coarse, fine = np.geomspace(1, 5, 65), np.geomspace(1, 5, 641)
    for r, resolved in ((coarse, False), (fine, True)):
        (s,) = find_flux_sheets(of_sheets([(2, 9, 0.25)], r=r), thickness=H)
        assert ("width not resolved" in s.flags) is not resolved
    widths = [
        find_flux_sheets(of_sheets([(2, 20, 0.25)]), thickness=H, smoothing=w)[0].width
        for w in (0, 0.1, 0.2)
    ]
    assert widths == pytest.approx([0.25 * FWHM] * 3, rel=0.03)
    none = find_flux_sheets(of_sheets([(2, 9, 0.25)], r=coarse), thickness=H, smoothing=0.05)
    assert any("not smoothed" in note for note in none.notes)


def test_thresholds_decide():
    made = of_sheets([(1.5, 1.7, 0.4), (2.0, 3.0, 0.4), (3.0, 12.0, 0.4)])
    radii = [round(s.radius, 1) for s in find_flux_sheets(made, thickness=H)]
    assert radii == [2.0, 3.0]
    assert len(find_flux_sheets(made, thickness=H, contrast=2)) == 3
    assert len(find_flux_sheets(made, thickness=H, contrast=5)) == 1
    assert len(find_flux_sheets(made, thickness=H, prominence=5)) == 1


def test_blended_pair():
    """Nearer than the half height: limits meet at the minimum, each side keeps its own flux."""
    pair = [(2.0, 10, 0.25), (2.13, 10, 0.25)]
    a, b = find_flux_sheets(of_sheets(pair), thickness=H)
    assert a.limits[1] == b.limits[0]
    assert a.flux_between is None
    assert "blended" in a.flags
    assert "blended" in b.flags
    assert a.flux + b.flux == pytest.approx(
        np.pi / 4 * np.diff(bells(np.array([a.limits[0], b.limits[1]]), pair))[0], rel=5e-3
    )


def test_a_sheet_of_the_other_polarity():
    made = of_sheets([(1.8, 8, 0.3), (3.0, -9, 0.3)])
    up, down = find_flux_sheets(made, thickness=H)
    assert (up.polarity, down.polarity) == (1, -1)
    assert down.flags == ("polarity", "absolute threshold")
    assert down.flux < 0
    assert down.contrast is None
    # A hole in the flux is no sheet as long as the field keeps its sign.
    (only,) = find_flux_sheets(of_sheets([(1.8, 8, 0.3), (3.0, -0.9, 0.3)]), thickness=H)
    assert only.polarity == 1


def test_zero_net_flux():
    """Sheets up and down in turn, nothing else: shares of nothing are not given."""
    radii, signs = np.array([1.4, 1.9, 2.6, 3.6]), np.array([1, -1, 1, -1])

    def psi(r, _):
        width = 0.3 * H * radii[:, None]
        return (signs[:, None] * ndtr((r - radii[:, None]) / width)).sum(0)

    found = find_flux_sheets(vertical(psi), thickness=H)
    assert np.abs(away(found, radii)).max() < 0.02
    assert [s.polarity for s in found] == list(signs)
    assert abs(found.total_flux) < 1e-12
    assert all(s.share is None for s in found)
    assert [s.unsigned_share for s in found] == pytest.approx([0.25] * 4, rel=0.05)
    assert any("no shares of the net flux" in note for note in found.notes)
    assert all("polarity" not in s.flags for s in found)


def test_noise_about_zero_makes_hardly_any_sheets():
    """5 spreads let one in 40 discs of noise through; a multiple of its median nearly all."""
    false = {"usual": 0, "low": 0}
    for seed in range(12):
        rng = np.random.default_rng(seed)
        wave, phase = 2 * np.pi / (H * rng.uniform(0.5, 4, 20)), rng.uniform(0, 6.28, 20)

        def psi(r, _, wave=wave, phase=phase):
            return np.sum(np.sin(wave[:, None] * np.log(r) + phase[:, None]) / wave[:, None], 0)

        noise = vertical(psi, r=np.geomspace(1, 5, 129))
        false["usual"] += len(find_flux_sheets(noise, thickness=H, lean=False))
        false["low"] += len(find_flux_sheets(noise, thickness=H, lean=False, absolute=1.5))
    assert false["usual"] <= 1
    assert false["low"] > 20


def test_no_vertical_field_at_all():
    found = find_flux_sheets(vertical(lambda r, _: 0 * r), thickness=H)
    assert len(found) == 0
    assert found.total_flux == 0
    assert found.relation is None


def test_edges_of_the_range():
    made = of_sheets([(1.03, 9, 0.3), (2.0, 9, 0.3), (3.0, 9, 0.3)])
    first, middle, last = find_flux_sheets(made, thickness=H)
    assert "edge" in first.flags
    assert first.limits[0] == pytest.approx(1.0)
    assert middle.flags == last.flags == ()
    inside = find_flux_sheets(made, thickness=H, r_range=(1.9, 3.12))
    assert inside.r_range[0] == pytest.approx(1.9, rel=0.01)
    assert "edge" in inside[1].flags
    cut = find_flux_sheets(made, thickness=H, r_range=(2.01, 5))
    assert [round(s.radius, 1) for s in cut] == [3.0]
    assert any("rises to the inner end" in note for note in cut.notes)


def test_gas_of_a_sheet():
    """A gap of known depth at the sheet, and a known pressure."""

    def density(r, theta):
        return r**-1.3 * (1 - 0.6 * np.exp(-0.5 * ((r - 2) / 0.12) ** 2)) + 0 * theta

    def pressure(r, theta):
        return 3 * r**-2.0 + 0 * theta

    made = of_sheets([(2, 9, 0.3)], cells={"density": density, "pressure": pressure}, mu0=4 * np.pi)
    (s,) = find_flux_sheets(made, thickness=H)
    # The gap takes a sixth of the window and lowers the median a little.
    assert s.depletion == pytest.approx(0.4, rel=0.04)
    assert s.beta_z == pytest.approx(8 * np.pi * 0.75 / s.field**2, rel=1e-3)
    assert s.field * 2 == pytest.approx(10, rel=0.01)


def test_what_is_absent_is_said():
    made = of_sheets(TWO)
    found = find_flux_sheets(made, thickness=H)
    assert [s.depletion for s in found] == [None, None]
    assert [s.beta_z for s in found] == [None, None]
    assert found.relation is None
    text = " ".join(found.notes)
    assert "has no density" in text
    assert "has no pressure" in text
    with pytest.raises(MissingFieldError, match="density"):
        find_flux_sheets(made)
    bare = fv.Snapshot.from_grid(made.grid)
    with pytest.raises(MissingFieldError, match="magnetic_theta"):
        find_flux_sheets(bare, thickness=H)


def test_cells_without_a_number():
    made = of_sheets(TWO, phi=np.linspace(0, 0.4, 9))
    faces = np.array(made.faces["magnetic_theta"])
    faces[0, 2, :, 200] = np.nan
    faces[0, :, :, 90] = np.inf
    with np.errstate(invalid="ignore"):
        found = find_flux_sheets(
            fv.Snapshot.from_grid(made.grid, faces={"magnetic_theta": faces}), thickness=H
        )
    assert np.abs(away(found, [1.6, 2.6])).max() < 0.02
    assert any("15 patches" in n or "9 patches" in n for n in found.notes)
    assert any("1 whole rings were bridged" in n for n in found.notes)
    # Also in the flux of a sheet that bends.
    bent = fv.demo_disc(shape=(8, 32, 128), sheet_wander=0.05)
    holed = np.array(bent.faces["magnetic_theta"])
    holed[0, 3, :, 28] = np.nan
    bent_holed = fv.Snapshot.from_grid(bent.grid, faces={"magnetic_theta": holed})
    one, other = (find_flux_sheets(s, thickness=H, lean=False) for s in (bent, bent_holed))
    assert [s.flux for s in one] == pytest.approx([s.flux for s in other], rel=0.05)
    dead = np.full_like(faces, np.nan)
    with pytest.raises(FieldvizError, match="got no number in any ring"):
        find_flux_sheets(
            fv.Snapshot.from_grid(made.grid, faces={"magnetic_theta": dead}), thickness=H
        )


def test_it_behaves_as_a_tuple_and_seeds_lines():
    made = of_sheets(TWO)
    found = find_flux_sheets(made, thickness=H)
    assert len(found) == 2
    assert list(found) == list(found.sheets) == [found[0], found[-1]]
    assert found[:1] == (found[0],)
    assert found[1] in found
    seeds = fv.sheet_seeds(made, [s.radius for s in found], 40, thickness=H)
    np.testing.assert_array_equal(seeds, fv.sheet_seeds(made, found, 40, thickness=H))


@pytest.mark.parametrize(
    ("settings", "words"),
    [
        ({"thickness": 2.0}, "expected a thickness"),
        ({"r_range": (0.5, 2)}, "expected a range of radii"),
        ({"r_range": (2.0, 2.01)}, "at least 5 cells"),
        ({"band": 0}, "expected band to be a positive"),
        ({"smoothing": -1}, "expected a smoothing"),
        ({"background_reach": np.nan}, "expected background_reach"),
        ({"contrast": -1}, "expected contrast"),
        ({"coverage": 1.5}, "a share of 0 to 1"),
    ],
)
def test_bad_settings(settings, words):
    with pytest.raises(FieldvizError, match=words):
        find_flux_sheets(of_sheets(TWO), **{"thickness": H, **settings})


def test_a_wedge_without_the_midplane_is_refused():
    theta = np.linspace(0.8, 1.4, 9)
    with pytest.raises(FieldvizError, match="holds the midplane"):
        find_flux_sheets(of_sheets(TWO, theta=theta), thickness=H)


# ---- parts ----------------------------------------------------------------------------------


@pytest.mark.parametrize("n_theta", [24, 25])
def test_flux_of_the_profile_is_that_of_the_disc(n_theta, small_disc):
    """Exact where the midplane is a face; between faces linear in cos(theta)."""
    law = fv.SaltmarshDisc()
    profile, of_band = flux_profile(small_disc(shape=(2, 4 * n_theta, 64)))
    tolerance = 1e-12 if n_theta == 24 else 5e-3
    assert profile.flux(1, 5) == pytest.approx(law.flux(1, 5), rel=tolerance)
    edges = profile.r_edges[[10, 40]]
    assert profile.flux(*edges) == pytest.approx(law.flux(*edges), rel=5 * tolerance)
    assert of_band.from_faces
    odd, _ = flux_profile(small_disc(shape=(2, 27, 64)))
    assert odd.flux(1, 5) == pytest.approx(law.flux(1, 5), rel=0.02)


def test_band_mean_is_the_integral_over_cosines(small_disc):
    """Against a fine sum over single cones."""
    disc = small_disc(shape=(1, 40, 32))
    (of_band,) = flux_maps(disc, [(MIDPLANE, 0.08)])
    c = centres(np.linspace(-np.sin(0.08), np.sin(0.08), 401))
    cones = flux_maps(disc, [(float(t), 0.0) for t in np.arccos(c)])
    mean = np.mean([cone.density for cone in cones], axis=0)
    np.testing.assert_allclose(of_band.density, mean, rtol=1e-4)


def test_thresholds_in_backgrounds_and_spreads():
    """The larger of 3 b and b + 1.5 s; b + 5 s without a scale; mirrored for the other polarity."""
    profile, _ = flux_profile(of_sheets([(2, 9, 0.3)]), thickness=H)
    n = len(profile.f)
    for b, s, up, down in ((1.0, 0.5, 3.0, 1.5), (1.0, 2.0, 4.0, 9.0), (0.1, 1.0, 5.1, 4.9)):
        made = replace(profile, background=np.full(n, b), spread=np.full(n, s))
        np.testing.assert_allclose(SheetCriteria().threshold(made, 1), up)
        np.testing.assert_allclose(SheetCriteria().threshold(made, -1), down)
    empty = replace(profile, background=np.zeros(n), spread=np.zeros(n))
    assert SheetCriteria().threshold(empty, 1) == pytest.approx(1e-3 * profile.smooth.max())
    mixed = replace(profile, f=np.where(np.arange(n) % 2, 1.0, -1.0) * profile.r)
    assert SheetCriteria().without_scale(mixed, 1).all()


def test_running_median_is_that_of_scipy():
    from scipy.ndimage import median_filter

    values = np.random.default_rng(0).normal(size=80)
    x, dx = np.arange(80.0), np.ones(80)
    expected = median_filter(values, size=11)
    inner = slice(5, -5)
    np.testing.assert_allclose(running_median(x, dx, values, 5.2)[inner], expected[inner])
    rows = np.stack([values, values])
    background, spread = row_medians(x, dx, rows, np.ones(2), values, 5.2)
    np.testing.assert_allclose(background[inner], expected[inner])
    # Of a long normal series the spread is the standard deviation.
    long = np.random.default_rng(1).normal(size=3000) * 3
    x, dx = np.arange(3000) * 0.01, np.full(3000, 0.01)
    wide = row_medians(x, dx, long[None], np.ones(1), long, 15.0)[1]
    assert wide[1500] == pytest.approx(3, rel=0.06)
    assert spread.min() > 0


def test_kernel_is_that_of_scipy_and_knows_its_variance():
    from scipy.ndimage import gaussian_filter1d

    values = np.random.default_rng(2).normal(size=200)
    kernel = gaussian_kernel(np.arange(200.0), np.ones(200), 3.0)
    expected = gaussian_filter1d(values, 3.0, truncate=5.0)
    np.testing.assert_allclose(kernel.apply(values)[20:-20], expected[20:-20], rtol=1e-10)
    assert kernel.variance[100] == pytest.approx(9, rel=1e-3)
    round_it = gaussian_kernel(np.arange(40.0), np.ones(40), 3.0, period=40.0)
    periodic = gaussian_filter1d(values[:40], 3.0, truncate=5.0, mode="wrap")
    np.testing.assert_allclose(round_it.apply(values[:40]), periodic, rtol=1e-10)
