"""Sheets in time: the events of the Saltmarsh disc, and histories written by hand."""

from dataclasses import replace
from itertools import permutations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.ndimage import gaussian_filter1d, median_filter
from scipy.signal import find_peaks
from sheet_fields import H, of_sheets

import fieldviz as fv
from fieldviz.errors import FieldvizError
from fieldviz.sheets.flux_sheets import find_flux_sheets
from fieldviz.sheets.tracking import track_flux_sheets

LAW = fv.SaltmarshDisc()
TIMES = np.arange(4.0, 10.01, 0.5)


@pytest.fixture(scope="module")
def template():
    """A found set of sheets to write others from."""
    return find_flux_sheets(of_sheets([(2.0, 8.0, 0.3)]), thickness=H, lean=False)


@pytest.fixture(scope="module")
def write(template):
    """A function: outputs as lists of (radius, flux) or (radius, flux, flags) -> FluxSheets."""

    def at(*outputs):
        found = []
        for time, rows in enumerate(outputs):
            sheets = tuple(
                replace(
                    template[0],
                    radius=row[0],
                    flux=row[1],
                    polarity=1 if row[1] > 0 else -1,
                    flags=row[2] if len(row) > 2 else (),
                )
                for row in sorted(rows, key=lambda row: row[0])
            )
            found.append((float(time), replace(template, sheets=sheets)))
        return found

    return at


def story(history):
    """Events as (kind, time, tracks)."""
    return [(event.kind, event.time, event.tracks) for event in history.events]


# ---- the Saltmarsh disc ---------------------------------------------------------------------


def snapshots(shape):
    return (fv.demo_disc(shape=shape, time=float(t)) for t in TIMES)


def test_merge_and_split_at_the_exact_outputs():
    """Without smoothing, and with hardly any prominence asked for, as soon as there is one maximum.

    Two equal bells of sd w are one maximum once they are 2 w apart: 6.667 and 7.333.
    """
    sharp = {"smoothing": 0.0, "prominence": 0.002, "band": 0.1, "thickness": H, "lean": False}
    history = track_flux_sheets(snapshots((1, 32, 512)), **sharp)
    events = LAW.events()
    assert [event.kind for event in history.events] == ["merge", "split"]
    for event in history.events:
        assert event.after < events[event.kind] <= event.time
        assert event.time - event.after == 0.5
    merge, split = history.events
    assert (merge.time, split.time) == (7.0, 7.5)
    assert merge.radius == pytest.approx(2.0, rel=5e-3)
    assert split.radius == pytest.approx(3.0, rel=0.02)
    assert [len(found) for found in history.found] == [5] * 6 + [4] + [5] * 6


@pytest.mark.parametrize("shape", [(1, 48, 192), (4, 48, 256)])
def test_without_noise_events_are_at_the_right_outputs_by_default(shape):
    history = track_flux_sheets(snapshots(shape))
    assert [(event.kind, event.time) for event in history.events] == [
        ("merge", 7.0),
        ("split", 7.5),
    ]


def seen_maxima(time, low, high):
    """Maxima of the closed form as the usual smoothing and prominence let them be seen."""
    x = np.arange(0, np.log(5) / H, 0.005)
    f = fv.SaltmarshDisc(time=time).radial_flux_density(np.exp(H * x))
    smooth = gaussian_filter1d(f, 0.1 / 0.005)
    coarse = median_filter(smooth[::10], size=121, mode="nearest")
    background = np.interp(x, x[::10], coarse)
    peaks, properties = find_peaks(smooth, prominence=0)
    good = properties["prominences"] > 0.5 * background[peaks]
    R = np.exp(H * x[peaks[good]])
    return int(((low < R) & (high > R)).sum())


def test_the_usual_smoothing_merges_earlier_and_splits_later():
    """At the outputs at which the smoothed closed form has one maximum or two."""
    noisy = {"smoothing": 0.1, "prominence": 0.5}  # as they are where there is noise
    history = track_flux_sheets(snapshots((1, 32, 192)), thickness=H, lean=False, **noisy)
    merged = next(t for t in TIMES if seen_maxima(t, 1.7, 2.4) == 1)
    parted = next(t for t in TIMES if seen_maxima(t, 2.6, 3.5) == 2)
    assert merged < LAW.events()["merge"]
    assert parted > LAW.events()["split"]
    (merge,), (split,) = history.events_of("merge"), history.events_of("split")
    assert merge.time == merged
    assert split.time == parted
    assert len(history.events) == 2
    assert len(history.tracks) == 6
    # The flux of both is there after the merge.
    ended, kept = (history.tracks[n] for n in merge.tracks)
    before = ended.fluxes[-1] + kept.fluxes[kept.outputs.index(ended.outputs[-1])]
    assert kept.fluxes[-1] == pytest.approx(before, rel=0.15)


def test_lifetimes_in_local_orbits(small_disc):
    """Sheets that stay where they are: t Omega/2 pi; both ends censored."""
    times = (0.0, 3.0, 6.0)
    series = (small_disc(shape=(1, 32, 96), time=t) for t in times)
    history = track_flux_sheets(series, thickness=H, lean=False, r_range=(1.0, 1.6))
    (track,) = history.tracks
    assert track.lifetime == pytest.approx(6 / (2 * np.pi * 1.4**1.5), rel=0.005)
    assert track.censored
    assert not track.persistent
    assert (track.begin, track.end) == ("first output", "last output")
    heavy = [replace(found, gm=4.0) for found in history.found]
    (twice,) = track_flux_sheets(zip(times, heavy, strict=True)).tracks
    assert twice.lifetime == pytest.approx(2 * track.lifetime)


# ---- histories written by hand --------------------------------------------------------------


def test_drift_birth_and_death(write):
    outputs = [[(1.5 + 0.02 * t, 1.0)] for t in range(6)]
    outputs[2].append((3.0, 0.5))
    outputs[3].append((3.0, 0.5))
    history = track_flux_sheets(write(*outputs))
    assert story(history) == [("birth", 2.0, (1,)), ("death", 4.0, (1,))]
    drifting, brief = history.tracks
    assert drifting.outputs == tuple(range(6))
    assert (brief.begin, brief.end, brief.censored) == ("birth", "death", False)
    assert brief.lifetime == pytest.approx(1 / (2 * np.pi * 3**1.5))


def test_merge_and_split(write):
    outputs = [
        [(1.9, 1.0), (2.1, 1.2)],
        [(1.95, 1.0), (2.05, 1.2)],
        [(2.0, 2.1)],
        [(2.0, 2.1)],
        [(1.96, 1.1), (2.04, 1.0)],
    ]
    history = track_flux_sheets(write(*outputs))
    assert [(e.kind, e.after, e.time) for e in history.events] == [
        ("merge", 1.0, 2.0),
        ("split", 3.0, 4.0),
    ]
    merge, split = history.events
    ended, kept = merge.tracks
    assert {ended, kept} == {0, 1}
    assert history.tracks[ended].end == "merge"
    assert split.tracks[0] == kept
    assert history.tracks[split.tracks[1]].begin == "split"


def test_backwards_in_time_events_turn_round(write):
    outputs = [
        [(1.9, 1.0), (2.1, 1.2), (3.0, 1.0)],
        [(2.0, 2.1), (3.0, 1.0)],
        [(2.0, 2.1)],
        [(2.0, 2.1)],
        [(2.0, 2.1), (4.0, 0.4)],
    ]
    forward = track_flux_sheets(write(*outputs))
    backward = track_flux_sheets(write(*outputs[::-1]))
    turned = {"merge": "split", "split": "merge", "birth": "death", "death": "birth"}
    assert sorted((turned[e.kind], 4 - e.after) for e in forward.events) == sorted(
        (e.kind, e.time) for e in backward.events
    )
    assert [e.kind for e in forward.events] == ["merge", "death", "birth"]


def test_a_neighbour_that_keeps_too_little_is_no_merge(write):
    """60 % of the summed flux is less than the 70 % asked for."""
    outputs = [[(1.95, 1.0), (2.05, 1.0)], [(2.0, 1.2)]]
    assert [e.kind for e in track_flux_sheets(write(*outputs)).events] == ["death"]
    assert [e.kind for e in track_flux_sheets(write(*outputs), kept_flux=0.5).events] == ["merge"]
    # A weak sheet that dies beside a strong one which does not grow has not merged with it.
    beside = [[(1.95, 0.1), (2.05, 1.0)], [(2.05, 1.0)]]
    assert [e.kind for e in track_flux_sheets(write(*beside)).events] == ["death"]


def test_one_missed_output_is_bridged_and_two_are_not(write):
    here, gone = [(2.0, 1.0), (3.0, 1.0)], [(2.0, 1.0)]
    history = track_flux_sheets(write(here, here, gone, here, here))
    assert history.events == ()
    assert [track.missed for track in history.tracks] == [0, 1]
    assert history.tracks[1].outputs == (0, 1, 3, 4)
    history = track_flux_sheets(write(here, here, gone, gone, here))
    assert story(history) == [("death", 2.0, (1,)), ("birth", 4.0, (2,))]


def test_what_is_missed_at_the_end_has_ended(write):
    history = track_flux_sheets(write([(2.0, 1.0), (3.0, 1.0)], [(2.0, 1.0)]))
    assert story(history) == [("death", 1.0, (1,))]
    assert history.tracks[1].censored  # it was there at the first output


def test_a_bridged_sheet_goes_on_with_its_drift(write):
    """0.6 H a step: after a gap it is 1.2 H away, but where it was expected."""
    radii = [2.0 * np.exp(0.06 * t) for t in range(6)]
    outputs = [[(R, 1.0)] for R in radii]
    outputs[3] = []
    (track,) = track_flux_sheets(write(*outputs)).tracks
    assert track.outputs == (0, 1, 2, 4, 5)


def test_left_and_entered(write):
    edge = ("edge",)
    outputs = [
        [(1.05, 1.0, edge), (2.0, 1.0)],
        [(2.0, 1.0)],
        [(2.0, 1.0)],
        [(2.0, 1.0), (4.9, 1.0, edge)],
    ]
    history = track_flux_sheets(write(*outputs))
    assert [(e.kind, e.time) for e in history.events] == [("left", 1.0), ("entered", 3.0)]
    # Without the flag, one that would have drifted out has left.
    drifting = [[(1.2, 1.0)], [(1.1, 1.0)], [(1.02, 1.0)], [], [], []]
    assert [e.kind for e in track_flux_sheets(write(*drifting)).events] == ["left"]


def test_polarity_and_gate(write):
    turned = track_flux_sheets(write([(2.0, 1.0)], [(2.0, -1.0)]))
    assert sorted(e.kind for e in turned.events) == ["birth", "death"]
    far = write([(2.0, 1.0)], [(2.0 * np.exp(1.3 * H), 1.0)])
    assert len(track_flux_sheets(far).tracks) == 2
    assert len(track_flux_sheets(far, gate=1.5).tracks) == 1


@settings(max_examples=25)
@given(data=st.data())
def test_the_assignment_is_the_cheapest(data, write):
    """Against all permutations, for sheets so close that all are within the gate."""
    n = data.draw(st.integers(1, 4))
    number = st.floats(0.0, 1.0)
    rows = [
        [(2 * np.exp(0.9 * H * data.draw(number)), 1 + data.draw(number)) for _ in range(n)]
        for _ in (0, 1)
    ]
    before, after = (sorted(side) for side in rows)
    history = track_flux_sheets(write(before, after))
    assert len(history.tracks) == n

    def cost(pairs):
        return sum(
            abs(np.log(after[b][0] / before[a][0])) / H
            + 0.5 * abs(np.log(after[b][1] / before[a][1]))
            for a, b in pairs
        )

    best = min(cost(enumerate(order)) for order in permutations(range(n)))
    chosen = sum(
        abs(np.log(t.radii[1] / t.radii[0])) / H + 0.5 * abs(np.log(t.fluxes[1] / t.fluxes[0]))
        for t in history.tracks
    )
    assert chosen == pytest.approx(best, abs=1e-9)


@settings(max_examples=20)
@given(radii=st.lists(st.lists(st.floats(1.1, 4.8), max_size=4), min_size=1, max_size=6))
def test_every_sheet_is_in_one_track(write, radii):
    """Whatever the series: no sheet twice, none lost, every begin and end with its event."""
    outputs = write(*[[(R, 1.0) for R in rows] for rows in radii])
    history = track_flux_sheets(outputs)
    assert sum(len(track.outputs) for track in history.tracks) == sum(map(len, radii))
    seen = {(n, id(s)) for t in history.tracks for n, s in zip(t.outputs, t.sheets, strict=True)}
    assert len(seen) == sum(map(len, radii))
    ended = [e for e in history.events if e.kind in ("death", "merge", "left")]
    assert len(ended) == sum(t.end != "last output" for t in history.tracks)
    begun = [e for e in history.events if e.kind in ("birth", "split", "entered")]
    assert len(begun) == sum(t.begin != "first output" for t in history.tracks)
    for track in history.tracks:
        assert (np.diff(track.outputs) <= 2).all()


def test_persistence(write):
    """At R = 1.2 an orbit takes 8.26: ten outputs are more than one, at R = 3 they are not."""
    outputs = [[(1.2, 1.0), (3.0, 1.0)]] * 10
    inner, outer = track_flux_sheets(write(*outputs)).tracks
    assert inner.persistent
    assert not outer.persistent


# ---- what may come in -----------------------------------------------------------------------


def test_series_on_disk_and_repeated_times(tmp_path):
    for name, time in (("a", 0.0), ("b", 1.0), ("c", 1.0)):
        disc = fv.demo_disc(shape=(1, 16, 96), time=time)
        fv.write_snapshot(tmp_path / f"{name}.h5", disc)
    history = track_flux_sheets(fv.read_series(str(tmp_path / "*.h5")), lean=False)
    assert list(history.times) == [0, 1]
    assert len(history.tracks) == 5
    again = track_flux_sheets(history.found)
    assert [t.number for t in again.tracks] == [t.number for t in history.tracks]
    twice = track_flux_sheets([(0.0, history.found[0])] * 2 + [(1.0, history.found[1])])
    assert len(twice.times) == 2
    assert any("1 outputs with the time of the one before" in note for note in twice.notes)


def test_one_output(write):
    history = track_flux_sheets(write([(2.0, 1.0)]))
    assert history.events == ()
    assert history.tracks[0].lifetime == 0
    assert any("nothing could be followed" in note for note in history.notes)


def test_bad_input(write):
    with pytest.raises(FieldvizError, match="at least one output"):
        track_flux_sheets([])
    with pytest.raises(FieldvizError, match="times that increase"):
        track_flux_sheets(write([], [])[::-1])
    for name, value in (("gate", 0), ("flux_weight", -1), ("kept_flux", np.nan)):
        with pytest.raises(FieldvizError, match=f"expected {name}"):
            track_flux_sheets(write([]), **{name: value})
