"""A proposal for a plain file reads it at once; what is guessed is said to be a guess."""

from __future__ import annotations

import h5py
import numpy as np
import pytest
from scattered_file import Choices, scatter, small_snapshot

import fieldviz as fv
from fieldviz.errors import LayoutError, SnapshotFileError
from fieldviz.snapshots.layout_description import layout_from_toml, layout_to_toml
from fieldviz.snapshots.proposal import propose_layout
from fieldviz.snapshots.proposal_words import axis_of_name, edge_or_centre, meaning_of_name

SHAPE = (3, 5, 7)  # phi, theta, r
R = np.geomspace(1, 4, 8)
THETA = np.linspace(1.1, 2.0, 6)
PHI = np.linspace(0, np.pi / 4, 4)
NAMES = ("density", "pressure", "velocity_r", "velocity_theta", "velocity_phi")


def cells(seed=0, shape=SHAPE):
    random = np.random.default_rng(seed)
    return {name: random.uniform(1, 2, shape).astype("f4") for name in NAMES}


def read_as_proposed(path):
    """Propose, write as TOML, read the text back, open the file with it."""
    description, notes = propose_layout(path)
    text = layout_to_toml(description, unsure=notes)
    again = layout_from_toml(text)
    assert again == description
    assert "" not in notes, notes
    return fv.read_snapshot(path, layout=again), description, notes


def test_plain_names_in_another_order(tmp_path):
    path = tmp_path / "heather.h5"
    values = cells()
    with h5py.File(path, "w") as file:
        for name, short in zip(NAMES, ("rho", "prs", "v1", "v2", "v3"), strict=True):
            file[f"fluid/{short}"] = values[name].transpose(2, 1, 0)
        file["x1_faces"], file["x2_faces"], file["x3_faces"] = R, THETA, PHI
        file.attrs["time"], file.attrs["gamma"] = 3.5, 1.4
    read, description, notes = read_as_proposed(path)
    assert description.axes.order == ("r", "theta", "phi")
    assert read.time == 3.5
    assert read.gamma == 1.4
    np.testing.assert_array_equal(read.grid.r_edges[0], R)
    for name in NAMES:
        np.testing.assert_array_equal(read.cells[name][0], values[name])
    assert "axes.order" not in notes


def test_blocks_on_an_axis_with_stacked_variables(tmp_path):
    snapshot = small_snapshot(4, levels=2, shape=(3, 4, 6))
    path = tmp_path / "sedge_0007.h5"
    with h5py.File(path, "w") as file:
        stack = np.stack([snapshot.cells[name] for name in snapshot.cells], axis=-1)
        file["all_states"] = stack
        file["all_states"].attrs["holds"] = np.array(
            ["dens", "vel_th", "b_r", "tracer"], dtype="S8"
        )
        for axis in ("r", "theta", "phi"):
            file[f"walls/{axis}"] = getattr(snapshot.grid, f"{axis}_edges")
        file["level"] = snapshot.grid.level
        for axis in ("r", "theta", "phi"):
            file[f"b_face_{axis}"] = snapshot.faces[f"magnetic_{axis}"]
        file["simulation_time"] = np.array([2.25])
    read, description, _ = read_as_proposed(path)
    assert description.blocks.stored == "axis"
    assert description.axes.order == ("block", "phi", "theta", "r", "variable")
    np.testing.assert_array_equal(read.grid.level, snapshot.grid.level)
    assert read.time == 2.25
    for name, stored in (
        ("density", "density"),
        ("velocity_theta", "velocity_theta"),
        ("magnetic_r", "magnetic_r"),
        ("tracer", "dust tracer"),
    ):
        np.testing.assert_array_equal(read.cells[name], snapshot.cells[stored])
    for name, values in snapshot.faces.items():
        np.testing.assert_array_equal(read.faces[name], values)


def test_one_group_per_block_with_latitude_and_degrees(tmp_path):
    snapshot = small_snapshot(4, levels=2, faces=False)
    path = tmp_path / "reeds.h5"
    with h5py.File(path, "w") as file:
        for block in range(snapshot.grid.n_blocks):
            group = file.create_group(f"mesh/plot_{block}")
            r, theta, phi = snapshot.grid.cell_centres(block)
            group["radius"] = r
            group["latitude"] = np.degrees(np.pi / 2 - theta[::-1])
            group["azimuth"] = np.degrees(phi)
            group["azimuth"].attrs["units"] = "deg"
            flipped = {name: snapshot.cells[name][block][:, ::-1] for name in snapshot.cells}
            group["dens"] = flipped["density"].astype(">f4")
            group["vlat"] = -flipped["velocity_theta"]
            group.attrs["level"] = snapshot.grid.level[block]
        file.create_group("header").attrs["t"] = 0.5
    read, description, notes = read_as_proposed(path)
    assert description.blocks.groups == "mesh/plot_*"
    assert description.grid["theta"].measured_from == "midplane"
    assert description.cells["velocity_theta"].sign == -1
    assert "points north" in notes["cells.velocity_theta.sign"]
    np.testing.assert_allclose(read.grid.theta_edges, snapshot.grid.theta_edges, rtol=1e-10)
    np.testing.assert_allclose(read.grid.r_edges, snapshot.grid.r_edges, rtol=1e-10)
    np.testing.assert_array_equal(read.cells["density"], snapshot.cells["density"])
    np.testing.assert_array_equal(read.cells["velocity_theta"], snapshot.cells["velocity_theta"])


def test_axisymmetric_data_with_ln_r_and_time_in_the_name(tmp_path):
    path = tmp_path / "marsh_0042.hdf5"
    density = np.random.default_rng(0).random((5, 7)).astype(">f8")
    with h5py.File(path, "w") as file:
        file["gas_density"] = density
        file["ln_r_edges"], file["colatitude_edges"] = np.log(R), THETA
        file["Bphi"] = density * 2
    read, description, notes = read_as_proposed(path)
    assert description.axes.order == ("theta", "r")
    assert description.grid["r"].transform == "ln"
    assert read.time == 42
    assert "time.file_name" in notes
    assert "grid.phi" in notes
    assert read.grid.is_full_ring
    np.testing.assert_allclose(read.grid.r_edges[0], R)
    np.testing.assert_array_equal(read.cells["density"][0, 0], density)
    np.testing.assert_array_equal(read.cells["magnetic_phi"][0, 0], density * 2)


def test_limits_as_attributes_and_a_vector_without_names(tmp_path):
    path = tmp_path / "lichen.h5"
    vector = np.random.default_rng(0).normal(size=(3, *SHAPE)).astype("f4")
    with h5py.File(path, "w") as file:
        file["velocity"] = vector
        file["density"] = vector[0] ** 2
        file.attrs["r_min"], file.attrs["r_max"] = 1.0, 4.0
        file.attrs["theta_range"], file.attrs["phi_range"] = [1.1, 2.0], [0.0, 0.5]
        file.attrs["time"] = 1.0
    read, _, notes = read_as_proposed(path)
    assert "grid.r.spacing" in notes
    assert "axes.order" in notes
    np.testing.assert_array_equal(read.cells["velocity_theta"][0], vector[1])
    np.testing.assert_array_equal(read.cells["density"][0], vector[0] ** 2)
    np.testing.assert_allclose(read.grid.theta_range, (1.1, 2.0))


def test_face_fields_tell_the_order_where_lengths_do_not(tmp_path):
    path = tmp_path / "moss.h5"
    with h5py.File(path, "w") as file:
        file["rho"] = np.arange(64.0).reshape(4, 4, 4)
        file["r_edges"], file["theta_edges"] = np.geomspace(1, 2, 5), np.linspace(1.2, 1.9, 5)
        file["phi_edges"] = np.linspace(0, 1, 5)
        file.attrs["time"] = 0.0
    _, first, notes = read_as_proposed(path)
    assert first.axes.order == ("phi", "theta", "r")
    assert "fits as well" in notes["axes.order"]
    with h5py.File(path, "a") as file:
        file["b_r"], file["b_theta"] = np.ones((5, 4, 4)), np.ones((4, 4, 5))
        file["b_phi"] = np.ones((4, 5, 4))
    _, second, notes = read_as_proposed(path)
    assert second.axes.order == ("r", "phi", "theta")
    assert set(second.faces) == {"magnetic_r", "magnetic_theta", "magnetic_phi"}
    assert "axes.order" not in notes


def test_ghost_cells_are_seen_from_the_lengths(tmp_path):
    path = tmp_path / "fern.h5"
    values = cells()["density"]
    with h5py.File(path, "w") as file:
        file["density"] = np.pad(values, [(0, 0), (2, 2), (3, 3)])
        file["r_edges"], file["theta_edges"], file["phi_edges"] = R, THETA, PHI
        file.attrs["time"] = 0.0
    read, description, notes = read_as_proposed(path)
    assert description.axes.ghost_cells == {"theta": 2, "r": 3}
    assert "axes.ghost_cells" in notes
    np.testing.assert_array_equal(read.cells["density"][0], values)


def test_what_has_no_place_is_named(tmp_path):
    path = tmp_path / "gorse.h5"
    with h5py.File(path, "w") as file:
        file["density"] = cells()["density"]
        file["r_edges"], file["theta_edges"], file["phi_edges"] = R, THETA, PHI
        file["particles"], file["odd_faces"] = np.ones((9, 6)), np.ones((3, 5, 8))
        file.attrs["time"] = 0.0
    read, _, notes = read_as_proposed(path)
    assert set(read.cells) == {"density"}
    assert notes["blocks"] == "no place was found for odd_faces, particles"


def test_one_list_names_two_stacks(tmp_path):
    path = tmp_path / "willow.h5"
    values = np.random.default_rng(0).random((5, *SHAPE))
    with h5py.File(path, "w") as file:
        file["alpha"], file["beta"] = values[:2], values[2:]
        file.attrs["contents"] = ["rho", "press", "b1", "b2", "b3"]
        file["r_edges"], file["theta_edges"], file["phi_edges"] = R, THETA, PHI
        file.attrs["time"] = 0.0
    read, _, notes = read_as_proposed(path)
    np.testing.assert_array_equal(read.cells["pressure"][0], values[1])
    np.testing.assert_array_equal(read.cells["magnetic_theta"][0], values[3])
    assert "one after the other" in notes["stacks.alpha.names"]


def test_coordinates_without_telling_names(tmp_path):
    path = tmp_path / "bracken.h5"
    with h5py.File(path, "w") as file:
        file["density"] = cells()["density"]
        file["one"], file["two"], file["three"] = R, THETA, PHI
        file.attrs["time"] = 0.0
    read, _, notes = read_as_proposed(path)
    np.testing.assert_array_equal(read.grid.theta_edges[0], THETA)
    assert notes["grid.r.edges"] == "taken for it by its range alone"


def test_what_was_not_found_is_not_made_up(tmp_path):
    path = tmp_path / "bare.h5"
    with h5py.File(path, "w") as file:
        file["density"] = cells()["density"]
    description, notes = propose_layout(path)
    assert "does not read the file yet" in notes[""]
    assert "nothing like r" in notes["grid.r"]
    assert "time.value" in notes
    with pytest.raises(LayoutError, match=r"\[grid\.r\].*got none|\[grid\.theta\].*got none"):
        fv.read_snapshot(path, layout=description)


def test_a_file_without_fields(tmp_path):
    path = tmp_path / "empty.h5"
    with h5py.File(path, "w") as file:
        file["note"] = "nothing here"
        file["numbers"] = np.arange(5)
    description, notes = propose_layout(path)
    assert "two axes or more" in notes[""]
    assert not description.cells


def test_odd_things_in_a_file_do_no_harm(tmp_path):
    path = tmp_path / "odd.h5"
    with h5py.File(path, "w") as file:
        file["density"] = cells()["density"]
        file["r_edges"], file["theta_edges"], file["phi_edges"] = R, THETA, PHI
        file.attrs["time"] = 0.0
        file["away"] = h5py.ExternalLink("none.h5", "x")
        file["soft"] = h5py.SoftLink("/nowhere")
        file["loop"] = file["/"]
        file["nothing"] = h5py.Empty("f4")
        file["words"] = np.array([b"one", b"\xff\xfe"], dtype="S8")
        file["pair"] = np.zeros(SHAPE, dtype=[("a", "f4")])
        file["complex"] = np.zeros(SHAPE, dtype="c8")
        file["hollow"] = np.zeros((0, 3))
        file["bad\nname \x07"] = np.ones(SHAPE)
        file["type"] = np.dtype("f4")
        file.attrs["none"] = h5py.Empty("f4")
        file.attrs["reference"] = file["density"].ref
    read, _, _ = read_as_proposed(path)
    assert set(read.cells) == {"density", "bad_name"}
    np.testing.assert_array_equal(read.cells["density"][0], cells()["density"])


def test_a_path_that_is_no_file(tmp_path):
    with pytest.raises(SnapshotFileError, match="no such file"):
        propose_layout(tmp_path / "none.h5")


@pytest.mark.parametrize("stored", ["single", "axis", "groups"])
@pytest.mark.parametrize("order", [("phi", "theta", "r"), ("r", "phi", "theta")])
def test_scattered_files_get_their_axes_right(tmp_path, stored, order):
    """Names say nothing of the fields here; axes and blocks must still come out right."""
    path = tmp_path / "scattered.h5"
    snapshot = small_snapshot(1, levels=1 if stored == "single" else 2, faces=False)
    wanted = scatter(snapshot, path, Choices(stored=stored, order=order, shared_edges=True))
    read, description, _ = read_as_proposed(path)
    assert description.blocks.stored == stored
    assert description.axes.order == wanted.axes.order
    np.testing.assert_allclose(read.grid.r_edges, snapshot.grid.r_edges, rtol=1e-12)
    np.testing.assert_array_equal(read.cells["data_0"], snapshot.cells["density"])


@pytest.mark.parametrize(
    ("name", "axis", "kind"),
    [
        ("r", "r", ""),
        ("grid/radii", "r", ""),
        ("x2_edges", "theta", "edges"),
        ("phic", "phi", "centres"),
        ("log_r_faces", "r", "edges"),
        ("LatitudeCentres", "theta", "centres"),
        ("time", "", ""),
        ("data_1_of_2", "", ""),
    ],
)
def test_words_for_coordinates(name, axis, kind):
    assert axis_of_name(name) == axis
    assert edge_or_centre(name) == kind


@pytest.mark.parametrize(
    ("name", "wanted"),
    [
        ("rho", "density"),
        ("gasDensity", "density"),
        ("velocity_x1", "velocity_r"),
        ("vphi", "velocity_phi"),
        ("mag_2", "magnetic_theta"),
        ("b_field_r", "magnetic_r"),
        ("eta_ambipolar", "diffusivity_ambipolar"),
        ("resistivity", "diffusivity_ohmic"),
        ("dust_density", None),
        ("momentum_1", None),
        ("temperature", None),
    ],
)
def test_words_for_fields(name, wanted):
    meaning = meaning_of_name(name)
    assert (meaning.name if meaning else None) == wanted
