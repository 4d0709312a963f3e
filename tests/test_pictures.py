"""Pictures: drawn whole or not at all, nothing over anything else, forces to scale."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from numpy.typing import NDArray
from PIL import Image

from fluxmesh.errors import OutputError, PictureError
from fluxmesh.report import picture_surface
from fluxmesh.report.picture_arrows import ARROW_STYLES, DrawnArrow, lay_out_arrows, pulled_in, reach_of
from fluxmesh.report.picture_labels import place_labels
from fluxmesh.report.picture_legend import ROLE_TINTS, stack_rows
from fluxmesh.report.picture_ports import find_ports
from fluxmesh.report.picture_pressure import pressure_bands
from fluxmesh.report.picture_sheet import Sheet
from fluxmesh.report.picture_text import (
    Ruler,
    clean_text,
    engineering,
    engineering_vector,
    nice_step,
    true_signs,
)
from fluxmesh.report.picture_view import View, axes_for, choose_direction, fit
from fluxmesh.report.pictures import draw_pressure, draw_vectors
from fluxmesh.report.scene import ARROW_KINDS, Arrow, Marker, Scene, area_vectors, merge_points, thin

SMALL = (800, 600)


def box_scene(cells: int = 4, names: tuple[str, str] = ("feed", "drain")) -> Scene:
    """A duct of 2 m by 1 m by 1 m along x, every triangle with its own points, ends as ports."""
    step = np.arange(cells) / cells
    u, v = (grid.ravel() for grid in np.meshgrid(step, step))
    d = 1.0 / cells
    square = np.array([[[0, 0], [d, 0], [d, d]], [[0, 0], [d, d], [0, d]]])
    patch = (np.stack([u, v], axis=1)[:, None, None] + square).reshape(-1, 3, 2)
    faces, groups = [], []
    for axis in range(3):
        for end in (0.0, 1.0):
            corner = np.empty((len(patch), 3, 3))
            first, second = (axis + 1) % 3, (axis + 2) % 3
            corner[..., axis], corner[..., first], corner[..., second] = end, patch[..., 0], patch[..., 1]
            faces.append(corner if end else corner[:, ::-1])
            groups.append(np.full(len(patch), 0 if axis else 1 + int(end), dtype=np.int32))
    points = np.concatenate(faces).reshape(-1, 3) * [2.0, 1.0, 1.0]
    triangles = np.arange(len(points), dtype=np.int64).reshape(-1, 3)
    surroundings = "surroundings on control volume"
    arrows = (
        Arrow(
            "pressure",
            f"pressure force at {names[0]}",
            surroundings,
            np.array([0, 0.5, 0.5]),
            np.array([3e3, 0, 0]),
            names[0],
        ),
        Arrow(
            "momentum",
            f"momentum at {names[0]}",
            surroundings,
            np.array([0, 0.5, 0.5]),
            np.array([200.0, 0, 0]),
            names[0],
        ),
        Arrow(
            "pressure",
            f"pressure force at {names[1]}",
            surroundings,
            np.array([2, 0.5, 0.5]),
            np.array([-2e3, 0, 0]),
            names[1],
        ),
        Arrow(
            "momentum",
            f"momentum at {names[1]}",
            surroundings,
            np.array([2, 0.5, 0.5]),
            np.array([-200.0, 0, 0]),
            names[1],
        ),
        Arrow("weight", "weight of the fluid", "earth on fluid", np.array([1, 0.5, 0.5]), np.array([0, 0, -900.0])),
        Arrow("resultant", "load", "flow on hardware", np.array([1, 0.5, 0.4]), np.array([1e3, 0, -900.0])),
        Arrow("reaction", "reaction", "anchor on hardware", np.array([1, 0.5, 0.0]), np.array([-1e3, 0, 900.0])),
    )
    return Scene(
        title="Duct",
        points=points,
        triangles=triangles,
        group_of_triangle=np.concatenate(groups),
        groups=(("shell", "wall"), (names[0], "inlet"), (names[1], "outlet")),
        pressure=3e3 - 500.0 * points[triangles].mean(axis=1)[:, 0],
        arrows=arrows,
        markers=(
            Marker("anchor", "anchor", np.array([1, 0.5, 0.0])),
            Marker("centroid", "centre", np.array([1, 0.5, 0.5])),
        ),
        notes=("Gravity acts along -z.",),
    )


def pixels(path: Path) -> NDArray[np.int64]:
    with Image.open(path) as image:
        return np.asarray(image.convert("RGB"), dtype=np.int64)


def front_view(scale: float = 200.0) -> View:
    """From -y: x to the right, z up."""
    axes = axes_for(np.array([0.0, -1.0, 0.0]), np.array([0.0, 0.0, 1.0]))
    return View(axes, np.array([1.0, 0.5, 0.5]), np.array([500.0, 400.0]), scale)


def drawn(scene: Scene, view: View) -> dict[str, DrawnArrow]:
    arrows = lay_out_arrows(scene, reach_of(scene, find_ports(scene)), view, 1.0)
    return {item.tag: item for item in arrows}


# ---- whole pictures


def test_both_pictures_have_the_size_are_not_blank_and_differ(tmp_path: Path) -> None:
    scene = box_scene()
    draw_vectors(scene, tmp_path / "vectors.png")
    draw_pressure(scene, tmp_path / "pressure.png")
    vectors, pressure = pixels(tmp_path / "vectors.png"), pixels(tmp_path / "pressure.png")
    assert vectors.shape == pressure.shape == (1200, 1600, 3)
    for image in (vectors, pressure):
        ink = image.min(axis=2) < 200
        assert 0.03 < ink.mean() < 0.6
        # the view on the left and the panel on the right both carry something
        assert ink[:, :1000].any()
        assert ink[:, 1060:].any()
    assert (np.abs(vectors - pressure).max(axis=2) > 40).mean() > 0.05
    assert sorted(path.name for path in tmp_path.iterdir()) == ["pressure.png", "vectors.png"]


def test_pressure_is_seen_in_the_colours_of_the_bar(tmp_path: Path) -> None:
    scene = replace(box_scene(), arrows=(), markers=(), pressure=np.full(192, 5.0e4))
    draw_pressure(scene, tmp_path / "one.png", SMALL)
    bands = pressure_bands(scene)
    number = int(np.searchsorted(bands.levels, 5.0e4, side="right")) - 1
    # light takes the shade of a face down to three quarters at most, and leaves its hue
    seen = pixels(tmp_path / "one.png")[100:330, 40:480].reshape(-1, 3).astype(float)
    hue = bands.palette[number].astype(float)
    share = seen @ hue / (hue @ hue)
    alike = (np.abs(seen - share[:, None] * hue).max(axis=1) < 6.0) & (share > 0.75) & (share < 1.1)
    assert alike.mean() > 0.1


def test_the_surface_lies_where_the_view_says() -> None:
    view = View(front_view().axes, np.array([0.0, 0.0, 0.0]), np.array([130.0, 90.0]), 50.0)
    points = np.array([[-1.0, 3.0, -0.8], [1.2, 3.0, -0.8], [1.2, 4.0, 1.1]])
    black = picture_surface.Layer(np.array([0]), np.zeros(3, dtype=np.uint8), 1.0)
    area = (40, 20, 240, 170)
    image = picture_surface.draw_surface(points, np.array([[0, 1, 2]]), [black], view, area, 1.0)
    assert image.shape == (150, 200, 3)
    rows, columns = np.nonzero(image[..., 0] < 128)
    low, high = view.project(points).min(axis=0) - area[:2], view.project(points).max(axis=0) - area[:2]
    seen = [columns.min(), 150 - 1 - rows.max(), columns.max() + 1, 150 - rows.min()]
    assert_allclose(seen, [*low, *high], rtol=0.0, atol=2.5)  # pixels, lines and a sharp corner


def test_an_empty_scene_and_a_far_one_are_drawn(tmp_path: Path) -> None:
    bare = replace(box_scene(), arrows=(), markers=(), notes=(), groups=(("a", "wall"), ("b", "wall"), ("c", "wall")))
    draw_vectors(bare, tmp_path / "bare.png", SMALL)
    # walls are translucent: pale, but neither white nor left out
    shade = pixels(tmp_path / "bare.png")[60:400, 20:500].mean(axis=2)
    assert ((shade > 120) & (shade < 245)).mean() > 0.2
    shift = np.array([4.0e6, -3.0e5, 100.0])
    far = replace(bare, points=bare.points + shift)
    draw_vectors(far, tmp_path / "far.png", SMALL)
    # far from the origin the picture is the same but for single pixels at edges
    assert (np.abs(pixels(tmp_path / "bare.png") - pixels(tmp_path / "far.png")).max(axis=2) > 60).mean() < 2e-3


def test_a_control_surface_around_a_body_is_opened_to_show_it(tmp_path: Path) -> None:
    outer = box_scene()
    inner = 0.3 * (outer.points - [1.0, 0.5, 0.5]) + [1.0, 0.5, 0.5]
    count = len(outer.points)
    both = replace(
        outer,
        points=np.vstack([outer.points, inner]),
        triangles=np.vstack([outer.triangles, outer.triangles[:, ::-1] + count]),
        group_of_triangle=np.repeat(np.array([0, 1], dtype=np.int32), 192),
        groups=(("around", "open"), ("body", "wall")),
        pressure=np.repeat([0.0, 1e5], 192),
        arrows=(),
        markers=(),
    )
    draw_pressure(both, tmp_path / "open.png", SMALL)
    # the yellow end of the colours is only on the body
    view = pixels(tmp_path / "open.png")[60:400, 20:500]
    assert ((view[..., 0] > 170) & (view[..., 2] < 110)).mean() > 0.005


def test_markup_and_other_scripts_in_names_are_drawn_as_text(tmp_path: Path) -> None:
    odd = box_scene(names=(r"$\frac{1$ <b>", "צינור\n排水\ud800\x00"))
    draw_vectors(replace(odd, title=r"$\alpha", notes=(r"$\sqrt",)), tmp_path / "odd.png", SMALL)
    assert pixels(tmp_path / "odd.png").shape == (600, 800, 3)


def test_text_is_never_read_as_mathematics() -> None:
    sheet, ruler = Sheet(SMALL), Ruler()
    for text in (r"$\frac{a}{b}$", r"\$x$", "<b>x</b>", "$"):
        sheet.text(10.0, 100.0, text, 20.0)
        # literal text is as wide as its letters are; a fraction or an exponent would be narrower
        assert ruler.width(text, 20.0) >= 0.8 * sum(ruler.width(letter, 20.0) for letter in text)
    sheet.text(10.0, 200.0, "two\nlines", 20.0)
    texts = sheet._axes.texts
    assert all(not mark.get_parse_math() for mark in texts)
    assert [mark.get_text() for mark in texts] == [r"$\frac{a}{b}$", r"\$x$", "<b>x</b>", "$", "two lines"]
    sheet.png()


# ---- failures leave nothing


def test_without_a_window_the_error_says_what_to_install(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    # the vendor-neutral EGL loader (open source, libglvnd) then finds no driver
    monkeypatch.setenv("__EGL_VENDOR_LIBRARY_DIRS", str(tmp_path))
    monkeypatch.delenv("DISPLAY", raising=False)
    picture_surface.offscreen_problem.cache_clear()
    try:
        with pytest.raises(
            PictureError, match=r"offscreen window\. Install .*apt-get install libgl1 libegl1"
        ) as caught:
            draw_vectors(box_scene(), tmp_path / "a.png", SMALL)
    finally:
        picture_surface.offscreen_problem.cache_clear()
    assert "\n" not in str(caught.value)
    assert not list(tmp_path.iterdir())


def test_without_the_library_the_error_gives_the_reason(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "pyvista.py").write_text("raise ImportError('libGL.so.1: no\\nsuch file')\n")
    monkeypatch.setenv("PYTHONPATH", str(tmp_path))
    picture_surface.offscreen_problem.cache_clear()
    try:
        with pytest.raises(PictureError, match=r"cannot be loaded \(libGL\.so\.1: no such file\)\. Install"):
            draw_pressure(box_scene(), tmp_path / "a.png", SMALL)
    finally:
        picture_surface.offscreen_problem.cache_clear()
    assert not (tmp_path / "a.png").exists()


@pytest.mark.parametrize(
    ("program", "reason"), [("/nowhere/python", "could not be started"), ("/bin/false", "no OpenGL library")]
)
def test_a_trial_that_cannot_run_is_a_problem(program: str, reason: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("sys.executable", program)
    assert reason in picture_surface.offscreen_problem.__wrapped__()


def test_a_trial_that_hangs_is_a_problem(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(picture_surface, "_PROBE", "import time; time.sleep(60)")
    monkeypatch.setattr(picture_surface, "_PROBE_SECONDS", 0.2)
    assert "did not open" in picture_surface.offscreen_problem.__wrapped__()


def test_a_folder_that_is_not_there_and_a_name_that_is_a_folder(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match=r"none: there is no such folder\. Make it"):
        draw_vectors(box_scene(2), tmp_path / "none" / "a.png", SMALL)
    (tmp_path / "taken.png").mkdir()
    (tmp_path / "taken.png" / "keep").touch()
    with pytest.raises(OutputError, match=r"taken\.png: cannot be written"):
        draw_vectors(box_scene(2), tmp_path / "taken.png", SMALL)
    # no temporary file stays behind
    assert [path.name for path in tmp_path.iterdir()] == ["taken.png"]


def test_no_pressure_and_too_small_a_picture_are_refused(tmp_path: Path) -> None:
    with pytest.raises(PictureError, match="carries no pressure"):
        draw_pressure(replace(box_scene(), pressure=None), tmp_path / "a.png")
    with pytest.raises(PictureError, match="carries no pressure"):
        draw_pressure(replace(box_scene(), pressure=np.full(192, np.nan)), tmp_path / "a.png")
    with pytest.raises(PictureError, match="400 by 300 pixels has no room"):
        draw_vectors(box_scene(), tmp_path / "a.png", (400, 300))
    assert not list(tmp_path.iterdir())


# ---- labels

AREA = (0.0, 0.0, 600.0, 400.0)
label = st.tuples(st.floats(0.0, 600.0), st.floats(0.0, 400.0), st.floats(8.0, 160.0), st.floats(8.0, 30.0))


@settings(max_examples=60, deadline=None)
@given(labels=st.lists(label, min_size=1, max_size=25), lines=st.lists(st.tuples(*[st.floats(0, 400)] * 4), max_size=4))
def test_labels_never_overlap_and_stay_inside(
    labels: list[tuple[float, float, float, float]], lines: list[tuple[float, float, float, float]]
) -> None:
    data = np.array(labels)
    boxes = np.array([[100.0, 100.0, 200.0, 160.0]])
    placed = place_labels(data[:, :2], data[:, 2:], AREA, boxes=boxes, lines=np.array(lines).reshape(-1, 4), gap=3.0)
    there = np.isfinite(placed).all(axis=1)
    assert there[0]  # with all but one box free there is room for the first
    assert_allclose(placed[there, 2:] - placed[there, :2], data[there, 2:], rtol=0.0, atol=1e-9)  # round-off
    assert (placed[there, :2] >= -1e-9).all()
    assert (placed[there, 2:] <= np.array(AREA[2:]) + 1e-9).all()
    everything = np.vstack([placed[there], boxes])
    for i, one in enumerate(everything):
        for two in everything[i + 1 :]:
            apart = max(two[0] - one[2], one[0] - two[2], two[1] - one[3], one[1] - two[3])
            assert apart >= 3.0 - 1e-9


def test_a_label_goes_where_it_is_wanted_and_off_lines_and_ink() -> None:
    anchor, size = np.array([[300.0, 200.0]]), np.array([[60.0, 20.0]])
    for wish in ([1.0, 0.0], [0.0, 1.0], [-1.0, 0.0], [0.0, -1.0]):
        box = place_labels(anchor, size, AREA, wanted=np.array([wish]))[0]
        middle = box.reshape(2, 2).mean(axis=0) - anchor[0]
        assert middle @ wish > 0.9 * np.linalg.norm(middle)
    line = np.array([[300.0, 200.0, 600.0, 200.0]])
    box = place_labels(anchor, size, AREA, wanted=np.array([[1.0, 0.0]]), lines=line)[0]
    assert box[1] > 200.0 or box[3] < 200.0
    busy = np.zeros((400, 600), dtype=bool)
    busy[:, 290:] = True
    assert place_labels(anchor, size, AREA, busy=busy)[0][2] <= 300.0


def test_a_label_without_room_is_left_out() -> None:
    anchors, sizes = np.full((3, 2), 50.0), np.full((3, 2), 60.0)
    placed = place_labels(anchors, sizes, (0.0, 0.0, 100.0, 100.0))
    assert np.isfinite(placed[0]).all()
    assert np.isnan(placed[1:]).all()


# ---- arrows


def test_arrow_lengths_follow_one_scale() -> None:
    scene = box_scene()
    reach = reach_of(scene, find_ports(scene))
    lengths = np.linalg.norm(reach.tip - reach.tail, axis=1)
    forces = np.array([arrow.magnitude for arrow in scene.arrows])
    assert_allclose(lengths, reach.metres_per_newton * forces, rtol=1e-12, atol=0.0)  # round-off
    view = front_view()
    for item in drawn(scene, view).values():
        seen = np.linalg.norm(item.end - item.start)
        turned = item.arrow.vector @ view.axes[:2].T
        if not item.enlarged:
            assert_allclose(seen, np.linalg.norm(turned) * reach.metres_per_newton * view.scale, rtol=1e-9, atol=0.0)
        # along the projected force, whatever the length
        assert_allclose((item.end - item.start) / seen, turned / np.linalg.norm(turned), rtol=0.0, atol=1e-9)


def test_port_forces_lie_outside_and_small_ones_are_flagged() -> None:
    items = drawn(box_scene(), front_view())
    assert list(items) == ["P1", "M1", "P2", "M2", "W", "L", "R"]
    view = front_view()
    inlet, outlet = view.project(np.array([[0, 0.5, 0.5], [2, 0.5, 0.5]]))
    for tag, end, sign in (("P1", inlet, -1.0), ("M1", inlet, -1.0), ("P2", outlet, 1.0), ("M2", outlet, 1.0)):
        item = items[tag]
        assert_allclose(item.end[0], end[0], rtol=0.0, atol=1e-9)  # the tip touches the port
        assert sign * (item.start[0] - end[0]) > 20.0
    assert [tag for tag, item in items.items() if item.enlarged] == ["M1", "M2"]
    suction = replace(box_scene().arrows[0], vector=np.array([-3e3, 0.0, 0.0]))
    item = drawn(replace(box_scene(), arrows=(suction,)), front_view())["P1"]
    assert_allclose(item.start[0], inlet[0], rtol=0.0, atol=1e-9)
    assert item.end[0] < inlet[0] - 20.0


def test_arrows_at_one_port_lie_side_by_side() -> None:
    items = drawn(box_scene(), front_view())
    for one, two in (("P1", "M1"), ("P2", "M2"), ("L", "R")):
        a, b = items[one], items[two]
        stations = np.linspace(0.0, 1.0, 30)[:, None]
        first, second = a.start + stations * (a.end - a.start), b.start + stations * (b.end - b.start)
        gap = np.linalg.norm(first[:, None] - second[None], axis=-1).min()
        assert gap >= 0.5 * (ARROW_STYLES[a.arrow.kind].head_width + ARROW_STYLES[b.arrow.kind].head_width)


def test_end_on_vanishing_and_repeated_arrows() -> None:
    at = np.array([1.0, 0.5, 0.5])
    forces = [(0, -5e3, 0), (0, 5e3, 0), (0, 0, 0), (0, 0, 1e-6)]
    arrows = tuple(Arrow("weight", "w", "earth on fluid", at, np.array(force, dtype=float)) for force in forces)
    items = drawn(replace(box_scene(), arrows=arrows), front_view())
    assert [item.end_on for item in items.values()] == [1, -1, 0, 0]
    assert [item.drawn for item in items.values()] == [True, True, False, False]
    assert list(items) == ["W1", "W2", "W3", "W4"]
    twice = box_scene().arrows[0]
    assert list(drawn(replace(box_scene(), arrows=(twice, twice)), front_view())) == ["P1", "P1'"]


def test_points_far_out_do_not_shrink_the_picture() -> None:
    scene = box_scene()
    far = np.array([300.0, 0.0, 0.0])
    size = 6.0**0.5
    assert np.linalg.norm(pulled_in(scene, far) - [1.0, 0.5, 0.5]) < size
    near = np.array([0.0, 0.0, 0.0])
    assert pulled_in(scene, near) is near
    reaction = replace(scene.arrows[6], at=far, through=far)
    # A resultant slides along its line to where the line passes the surface: it is not moved off it.
    away = np.array([1.0, 0.5, 0.4]) + 500.0 * np.array([1e3, 0.0, -900.0]) / 1345.36
    load = replace(scene.arrows[5], at=away, through=np.array([1.0, 0.5, 0.4]))
    items = drawn(replace(scene, arrows=(reaction, load)), front_view())
    assert items["R"].moved
    assert items["R"].line is None
    assert not items["L"].moved
    assert items["L"].line is not None
    ahead = np.array([1e3, -900.0]) / np.hypot(1e3, 900.0)
    on_line = front_view().project(np.array([1.0, 0.5, 0.4])) - items["L"].line[0]
    assert_allclose(on_line[0] * ahead[1] - on_line[1] * ahead[0], 0.0, atol=0.05)  # the 1345.36 is rounded


def test_kinds_of_arrow_differ_in_form_and_roles_in_grey() -> None:
    assert tuple(ARROW_STYLES) == ARROW_KINDS
    assert len({style.shaft for style in ARROW_STYLES.values()}) == len(ARROW_KINDS)
    assert len({style.letter for style in ARROW_STYLES.values()}) == len(ARROW_KINDS)
    # luma weights of ITU-R BT.601
    grey = sorted(float(np.array(tint) @ [0.299, 0.587, 0.114]) for tint in ROLE_TINTS.values())
    assert min(np.diff(grey)) > 15.0


# ---- legend


def test_every_force_has_a_row_under_its_bodies() -> None:
    items = list(drawn(box_scene(), front_view()).values())
    listing = stack_rows(items, 900.0)
    assert (listing.shrink, listing.one_line, listing.left_out) == (1.0, False, 0)
    assert [row.item.tag if row.item else row.heading for row in listing.rows] == [
        "surroundings on control volume", "P1", "P2", "M1", "M2",
        "earth on fluid", "W", "flow on hardware", "L", "anchor on hardware", "R",
    ]  # fmt: skip
    # with less room a force takes one line, and only then the smallest go
    listing = stack_rows(items, 300.0)
    assert (listing.one_line, listing.left_out) == (True, 0)
    assert 0.7 <= listing.shrink <= 1.0
    listing = stack_rows(items, 150.0)
    assert listing.left_out > 0
    assert 0.7 <= listing.shrink <= 1.0
    kept = [row.item.arrow.magnitude for row in listing.rows if row.item]
    assert min(kept) >= sorted(item.arrow.magnitude for item in items)[listing.left_out]
    assert stack_rows([], 100.0).rows == []
    only_ports = stack_rows([item for item in items if item.arrow.kind == "pressure"], 80.0)
    assert only_ports.rows[0].heading == "surroundings on control volume: pressure at"


def test_a_long_name_takes_a_second_line_where_there_is_room() -> None:
    from fluxmesh.report.picture_legend import _draw_line

    item = drawn(box_scene(), front_view())["L"]
    long = replace(item, arrow=replace(item.arrow, label="load of the flow, weight of fluid included"))
    sheet = Sheet((1600, 1200))
    assert _draw_line(sheet, long, 1030.0, 1570.0, 600.0, 1.0, True)
    first = [mark.get_text() for mark in sheet._axes.texts][-1]
    assert first.startswith("load of")
    assert "…" not in first
    rest = _draw_line(sheet, long, 1030.0, 1570.0, 600.0, 1.0, True)
    assert f"{first} {rest}" == long.arrow.label
    # without room it is cut, and a short name needs none
    assert not _draw_line(sheet, long, 1030.0, 1570.0, 600.0, 1.0, False)
    assert "…" in [mark.get_text() for mark in sheet._axes.texts][-1]
    assert not _draw_line(sheet, item, 1030.0, 1570.0, 600.0, 1.0, True)


# ---- view


def test_view_keeps_lengths_and_up_and_fits() -> None:
    axes = axes_for(np.array([1.0, -2.0, 0.7]), np.array([0.0, 0.0, 1.0]))
    assert_allclose(axes @ axes.T, np.eye(3), rtol=0.0, atol=1e-15)
    assert_allclose(np.cross(axes[0], axes[1]), axes[2], rtol=0.0, atol=1e-15)
    assert axes[1] @ [0.0, 0.0, 1.0] > 0.0
    points = box_scene().points + 1e3
    view = fit(axes, points, (100.0, 50.0, 700.0, 350.0))
    flat = view.project(points)
    low, high = flat.min(axis=0), flat.max(axis=0)
    assert_allclose(0.5 * (low + high), [400.0, 200.0], rtol=0.0, atol=1e-6)
    assert_allclose(((high - low) / [600.0, 300.0]).max(), 1.0, rtol=1e-9, atol=0.0)
    assert_allclose(view.project(view.lift(flat)), flat, rtol=0.0, atol=1e-6)


def test_the_chosen_view_shows_every_port() -> None:
    # three ports that one octant sees
    normals = np.eye(3)
    toward = choose_direction(normals, normals, np.zeros((0, 3)), 2.0, np.array([0.0, 0.0, 1.0]))
    assert (normals @ toward > 0.3).all()
    # the same, with gravity along y
    toward = choose_direction(normals, normals, np.zeros((0, 3)), 2.0, np.array([0.0, 1.0, 0.0]))
    assert (normals @ toward > 0.3).all()
    # a face, not a back
    back = np.array([[-1.0, 0.0, 0.0]])
    toward = choose_direction(back, back, np.zeros((0, 3)), 2.0, np.array([0.0, 0.0, 1.0]))
    assert float(back[0] @ toward) > 0.3
    # a force is not looked at from its end
    force = np.array([[1.0, 0.0, 0.0]])
    toward = choose_direction(np.zeros((0, 3)), np.zeros((0, 3)), force, 2.0, np.array([0.0, 0.0, 1.0]))
    assert abs(float(force[0] @ toward)) < 0.7


# ---- ports and thinning


def test_ports_have_centroid_normal_and_rim() -> None:
    feed, drain = find_ports(box_scene())
    assert (feed.number, feed.name, feed.role) == (1, "feed", "inlet")
    assert (drain.number, drain.name, drain.role) == (2, "drain", "outlet")
    assert_allclose(feed.normal, [-1.0, 0.0, 0.0], rtol=0.0, atol=1e-12)
    assert_allclose(drain.centroid, [2.0, 0.5, 0.5], rtol=0.0, atol=1e-12)
    (rim,) = feed.rims
    assert_allclose(np.linalg.norm(np.diff(rim, axis=0), axis=1).sum(), 4.0, rtol=1e-9, atol=0.0)
    closed = replace(box_scene(), groups=(("all", "open"),), group_of_triangle=np.zeros(192, dtype=np.int32), arrows=())
    (port,) = find_ports(closed)
    assert not port.normal.any()
    assert not port.rims


def test_merging_joins_what_is_one_point_only() -> None:
    scene = box_scene(cells=3)
    points, triangles = merge_points(scene.points, scene.triangles)
    assert len(points) == 4**3 - 2**3
    assert_allclose(points[triangles], scene.points[scene.triangles], rtol=0.0, atol=1e-12)


def test_thinning_keeps_shape_groups_and_pressure() -> None:
    scene = box_scene(cells=60)
    assert len(scene.triangles) == 43_200
    coarse = thin(scene, most=4_000)
    assert 1_000 < len(coarse.triangles) <= 4_000
    assert_allclose(
        coarse.pressure_range, (2000.0, 3000.0), rtol=0.01, atol=0.0
    )  # means of facets, 1/180 of 1000 Pa inside
    for group, area in ((0, 8.0), (1, 1.0), (2, 1.0)):
        mine = coarse.triangles[coarse.group_of_triangle == group]
        # points of edge cells move inward by up to half a cell: a few per cent
        assert_allclose(np.linalg.norm(area_vectors(coarse.points, mine), axis=1).sum(), area, rtol=0.12, atol=0.0)
    assert coarse.pressure is not None
    middles = coarse.points[coarse.triangles].mean(axis=1)
    assert_allclose(coarse.pressure, 3e3 - 500.0 * middles[:, 0], rtol=0.0, atol=60.0)  # a cell is 0.1 m, 50 Pa
    assert thin(coarse, most=4_000) is coarse


def test_thinning_of_slivers_and_unused_points() -> None:
    scene = box_scene(cells=4)
    rng = np.random.default_rng(11)
    corners = (rng.random((3_000, 1, 3)) + 1e-3 * rng.random((3_000, 3, 3))).reshape(-1, 3)
    dust = Scene("dust", corners, np.arange(9_000).reshape(-1, 3), np.zeros(3_000, dtype=np.int32), (("a", "wall"),))
    coarse = thin(dust, most=200)
    assert 0 < len(coarse.triangles) < 200  # by a coarser grid; the last resort would give exactly 200
    assert np.unique(coarse.triangles).size == len(coarse.points)
    plate = replace(scene, points=scene.points * [1.0, 1.0, 1e-4])
    sheet = thin(plate, most=100)
    assert len(np.unique(np.sort(sheet.triangles, axis=1), axis=0)) == len(sheet.triangles)
    flat = replace(scene, points=scene.points * [1.0, 0.0, 0.0])
    assert 0 < len(thin(flat, most=50).triangles) <= 50
    stray = replace(scene, points=np.vstack([scene.points, [[1e6, 0.0, 0.0]]]))
    assert thin(stray).points.max() == 2.0


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"points": np.zeros((4, 2))}, "make no surface"),
        ({"points": np.full((576, 3), np.nan)}, "not finite"),
        ({"triangles": np.full((192, 3), 600)}, "outside 0 to 575"),
        ({"group_of_triangle": np.zeros(3, dtype=np.int32)}, "3 group numbers for 192"),
        ({"group_of_triangle": np.full(192, 3, dtype=np.int32)}, "outside 0 to 2"),
        ({"pressure": np.zeros(5)}, "5 pressures for 192"),
        ({"up": np.zeros(2)}, "up needs three"),
    ],
)
def test_a_scene_that_does_not_fit_is_refused(change: dict[str, NDArray[np.float64]], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        replace(box_scene(), **change)


def test_arrows_and_markers_of_no_kind_are_refused() -> None:
    with pytest.raises(ValueError, match="none of pressure, momentum"):
        Arrow("lift", "x", "y", np.zeros(3), np.zeros(3))
    with pytest.raises(ValueError, match="three finite numbers"):
        Arrow("weight", "x", "y", np.zeros(3), np.full(3, np.inf))
    with pytest.raises(ValueError, match="none of anchor, centroid"):
        Marker("pin", "x", np.zeros(3))


# ---- pressure bands


@settings(max_examples=60, deadline=None)
@given(low=st.floats(-1e7, 1e7), span=st.floats(0.0, 1e7))
def test_bands_cover_the_pressure_with_round_levels(low: float, span: float) -> None:
    scene = box_scene(cells=1)
    pressure = np.linspace(low, low + span, 12)
    bands = pressure_bands(replace(scene, pressure=pressure))
    step = np.diff(bands.levels)
    assert 1 <= len(step) <= 16
    assert_allclose(step, step[0], rtol=1e-6, atol=1e-9)
    assert bands.levels[0] <= pressure.min() + 1e-5 * step[0]
    assert bands.levels[-1] >= pressure.max() - 1e-5 * step[0]
    assert len(bands.palette) == len(step)
    grey = bands.palette @ np.array([0.299, 0.587, 0.114])
    assert (np.diff(grey) > 0.0).all()  # lighter with every band when printed in grey


def test_one_wild_face_does_not_set_the_bands() -> None:
    scene = box_scene(cells=20)
    assert scene.pressure is not None
    pressure = scene.pressure.copy()
    pressure[7] = 9e9
    bands = pressure_bands(replace(scene, pressure=pressure))
    assert bands.levels[-1] < 4e3
    assert bands.most == 9e9
    # extremes that thinning lost are still named
    assert pressure_bands(replace(scene, pressure_range=(-7.0, 8e3))).least == -7.0


# ---- words and numbers


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.0, "0 N"), (1234.5, "1.234 kN"), (999.96, "1.000 kN"), (-12.0, "\u221212.00 N"), (0.0315, "31.50 mN"),
        (2.5e7, "25.00 MN"), (3e-9, "3.000e\u221209 N"), (4e15, "4.000e+15 N"),
    ],
)  # fmt: skip
def test_engineering_notation(value: float, text: str) -> None:
    assert engineering(value, "N") == text


def test_components_share_unit_and_decimals() -> None:
    assert engineering_vector((3000.0, -0.4, 40.0), "N") == ("3.000 kN", "(3.000, 0.000, 0.040) kN")
    assert engineering_vector((0.0, 0.0, 0.0), "N") == ("0 N", "(0, 0, 0) N")
    assert engineering_vector((0.0, -12.3, 0.0), "N")[1] == "(0.00, \u221212.30, 0.00) N"


@given(st.floats(1e-12, 1e12))
def test_nice_steps_are_round_and_not_above(value: float) -> None:
    step = nice_step(value)
    assert 0.49 * value <= step <= value * (1 + 1e-6)
    mantissa = step / 10.0 ** np.floor(np.log10(step) + 1e-9)
    assert min(abs(mantissa - m) for m in (1.0, 2.0, 2.5, 5.0)) < 1e-6


def test_text_is_cleaned_cut_and_wrapped() -> None:
    assert clean_text("a\nb\tc\u202ed\x07\ud800") == "a b cd\ufffd"
    assert clean_text("צ 1") == "\u200eצ 1"
    assert clean_text(clean_text("צ 1")) == clean_text("צ 1")
    ruler = Ruler()
    assert ruler.cut("short", 18.0, 500.0) == "short"
    cut = ruler.cut("a name that is far too long for its place", 18.0, 120.0)
    assert cut.endswith("…")
    assert ruler.width(cut, 18.0) <= 120.0
    lines = ruler.wrap("one two three four five " + "w" * 100, 18.0, 120.0)
    assert len(lines) > 2
    assert all(ruler.width(line, 18.0) <= 120.0 for line in lines)
    assert " ".join(lines).startswith("one two three four five w")
    assert ruler.wrap("", 18.0, 100.0) == []


def test_notes_have_true_signs_and_powers_of_ten() -> None:
    text = "a moment of (-15.98, 0, -8.327e-13) N m, gravity (0, 0, -9.8) m/s², port-2 at 1e5, 2.5e+07 Pa"
    assert true_signs(text) == (
        "a moment of (\u221215.98, 0, \u22128.327×10⁻¹³) N·m, gravity (0, 0, \u22129.8) m/s², port-2 at 1e5, 2.5×10⁷ Pa"
    )
