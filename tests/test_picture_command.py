"""`picture`: files of every kind, views, backgrounds, choice of forces, and that nothing hides anything."""

from __future__ import annotations

import base64
import io
import re
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

import numpy as np
import pytest
from numpy.testing import assert_allclose
from PIL import Image

from fluxmesh.case.read import read_case
from fluxmesh.errors import FieldError, PictureError
from fluxmesh.job.picture import SHOWN, picture_of_case
from fluxmesh.job.run import run_case
from fluxmesh.report import picture_overlay
from fluxmesh.report.picture_arrows import ARROW_STYLES, DrawnArrow, chained, lay_out_arrows, reach_of
from fluxmesh.report.picture_legend import _remarks
from fluxmesh.report.picture_ports import find_ports
from fluxmesh.report.picture_sheet import Sheet
from fluxmesh.report.picture_text import Ruler, clean_text
from fluxmesh.report.picture_view import axes_for, choose_direction, direction_from, fit
from fluxmesh.report.pictures import Look, draw_picture, require_drawable
from fluxmesh.report.scene import ARROW_KINDS, Arrow, Marker, Scene, in_words, only_kinds
from fluxmesh.report.sketch import arrows_of, scene_of
from tests.conftest import CASE, Block
from tests.test_pictures import box_scene

SMALL = (800, 600)
UP = np.array([0.0, 0.0, 1.0])
# markup, quotes, entities, a formula, letters that run from right to left
ODD = """<b onload="x()">'f'&amp;</b> $x$ צינור"""


def odd_scene() -> Scene:
    return replace(box_scene(names=(ODD, "out")), title=f"Title {ODD}", notes=(f"Note {ODD}",))


def comb(branches: int) -> Scene:
    """A header along x with so many branches to alternating sides, every group a port but the first."""
    points: list[np.ndarray] = []
    triangles: list[np.ndarray] = []
    numbers: list[np.ndarray] = []
    groups, arrows = [("shell", "wall")], []
    turn = np.linspace(0.0, 2 * np.pi, 12, endpoint=False)
    for k in range(branches):
        side = 1.0 if k % 2 else -1.0
        foot = np.array([k / branches, 0.0, 0.0])
        along = np.array([0.1 * (k % 3 - 1), side, 0.3 * (k % 2)])
        along /= np.linalg.norm(along)
        across = np.cross(along, UP)
        across /= np.linalg.norm(across)
        ring = 0.03 * (np.cos(turn)[:, None] * across + np.sin(turn)[:, None] * np.cross(along, across))
        end = foot + 0.3 * along
        first = sum(map(len, points))
        points.append(np.vstack([foot + ring, end + ring, end]))
        i, j = np.arange(12), (np.arange(12) + 1) % 12
        wall = np.vstack([np.stack([i, j, 12 + i], axis=1), np.stack([j, 12 + j, 12 + i], axis=1)])
        cap = np.stack([12 + i, 12 + j, np.full(12, 24)], axis=1)
        triangles += [first + wall, first + cap]
        numbers += [np.zeros(24, np.int32), np.full(12, k + 1, np.int32)]
        name = f"branch number {k + 1} of the distributor"
        groups.append((name, "outlet"))
        for kind, force in (("pressure", 300.0 + 10 * k), ("momentum", 3.0 + k)):
            arrows.append(Arrow(kind, f"{kind} at {name}", f"{kind} on fluid", end, -force * along, name))
    middle = np.array([0.45, 0.0, 0.0])
    arrows += [
        Arrow("weight", "weight of fluid", "gravity on fluid", middle, np.array([0.0, 0.0, -90.0])),
        Arrow("weight", "weight of hardware", "gravity on hardware", middle, np.array([0.0, 0.0, -150.0])),
        Arrow("resultant", "load", "flow on hardware", middle, np.array([200.0, 0.0, -400.0]), through=middle),
        Arrow("reaction", "reaction", "anchor on hardware", middle, np.array([-200.0, 0, 550.0]), through=middle),
    ]
    return Scene(
        title="Comb",
        points=np.vstack(points),
        triangles=np.vstack(triangles).astype(np.int64),
        group_of_triangle=np.concatenate(numbers),
        groups=tuple(groups),
        arrows=tuple(arrows),
        markers=(Marker("anchor", "anchor", middle), Marker("centroid", "centre", middle + np.array([0.1, 0.0, 0.0]))),
    )


def laid_out(scene: Scene, toward: np.ndarray | None = None) -> tuple[list[DrawnArrow], Any]:
    ports = find_ports(scene)
    reach = reach_of(scene, ports)
    if toward is None:
        middles, normals = np.array([p.centroid for p in ports]), np.array([p.normal for p in ports])
        toward = choose_direction(middles, normals, np.empty((0, 3)), 1.0, scene.up)
    view = fit(axes_for(toward, scene.up), np.vstack([scene.points, reach.tail, reach.tip]), (90, 200, 950, 1040))
    return lay_out_arrows(scene, reach, view, 1.0), view


# ---- kinds of files


def test_a_vector_file_has_its_text_as_text_and_nothing_runs(tmp_path: Path) -> None:
    draw_picture(odd_scene(), tmp_path / "a.svg", Look(size=SMALL))
    text = (tmp_path / "a.svg").read_text(encoding="utf-8")
    root = ElementTree.fromstring(text)
    tag = "{http://www.w3.org/2000/svg}"
    said = [" ".join("".join(mark.itertext()).split()) for mark in root.iter(f"{tag}text")]
    assert any("Title <b onload" in line for line in said)
    assert any(line.endswith("צינור") for line in said)
    assert any(line.startswith("Verdict") or line.startswith("This is the load") for line in said)
    assert root.find(f"{tag}title").text.replace("\u200e", "") == f"Title {ODD}"
    assert "on hardware: load, force (1000, 0, -900) N." in root.find(f"{tag}desc").text
    assert {child.tag for child in root.iter()} & {f"{tag}script", f"{tag}b", "b", f"{tag}foreignObject"} == set()
    assert [key for child in root.iter() for key in child.attrib if key.startswith("on")] == []
    # nothing is fetched from anywhere: the letters and the image are in the file
    links = re.findall(r'(?:href="|url\()([^")]*)', text)
    assert links
    assert all(link.startswith(("#", "data:")) for link in links)
    assert text.count("@font-face") == 2


def test_a_vector_file_is_the_same_each_time(tmp_path: Path) -> None:
    for kind in ("svg", "pdf"):
        for name in ("a", "b"):
            draw_picture(box_scene(), tmp_path / f"{name}.{kind}", Look(size=SMALL))
        assert (tmp_path / f"a.{kind}").read_bytes() == (tmp_path / f"b.{kind}").read_bytes()


def test_a_pdf_has_the_size_of_paper_and_its_letters(tmp_path: Path) -> None:
    draw_picture(odd_scene(), tmp_path / "a.pdf", Look(size=(1000, 700)))
    content = (tmp_path / "a.pdf").read_bytes()
    assert content.startswith(b"%PDF-")
    assert content.rstrip().endswith(b"%%EOF")
    box = re.search(rb"/MediaBox \[ 0 0 ([\d.]+) ([\d.]+) \]", content)
    # 0.16 mm a pixel, 72 points an inch of 25.4 mm
    assert_allclose([float(box[1]), float(box[2])], np.array([1000, 700]) * 0.16 / 25.4 * 72, rtol=1e-5)
    assert b"/ToUnicode" in content
    assert b"/Subtype /Type3" not in content
    assert content.count(b"/Subtype /Image") == 1


def test_the_surface_is_finer_on_paper_than_in_pixels(tmp_path: Path) -> None:
    draw_picture(box_scene(), tmp_path / "a.svg", Look(size=SMALL))
    data = re.search(r'href="data:image/png;base64,\s*([^"]+)"', (tmp_path / "a.svg").read_text())[1]
    with Image.open(io.BytesIO(base64.b64decode(data))) as image:
        # panel and margins take 630 of 1600, at half size; twice finer
        assert image.size[0] == 2 * (800 - 315)


def test_without_paper_the_picture_lies_on_any(tmp_path: Path) -> None:
    draw_picture(box_scene(), tmp_path / "none.png", Look(size=SMALL, background="transparent"))
    draw_picture(box_scene(), tmp_path / "white.png", Look(size=SMALL))
    with Image.open(tmp_path / "none.png") as image:
        assert image.mode == "RGBA"
        clear = np.asarray(image).astype(float)
    with Image.open(tmp_path / "white.png") as image:
        assert image.mode == "RGB"
        white = np.asarray(image).astype(float)
    view = clear[70:320, 20:480, 3]
    assert clear[3, 3, 3] == view[0, 0] == 0.0
    assert clear[..., 3].max() == 255.0
    # translucent walls let the paper through
    assert ((view > 40) & (view < 200)).mean() > 0.1
    share = clear[..., 3:] / 255.0
    assert np.abs(clear[..., :3] * share + 255.0 * (1.0 - share) - white).max() < 4.0  # steps of eight bits, twice


def test_a_coloured_paper_is_everywhere_and_never_too_dark(tmp_path: Path) -> None:
    draw_picture(box_scene(), tmp_path / "a.png", Look(size=SMALL, background="#F4F1EA"))
    with Image.open(tmp_path / "a.png") as image:
        seen = np.asarray(image.convert("RGB"))
    paper = (seen == [0xF4, 0xF1, 0xEA]).all(axis=2)
    # half of the sheet is paper, in the view too
    assert paper.mean() > 0.5
    assert paper[60:100, 30:480].mean() > 0.5
    for wrong, said in (("#202020", "too dark"), ("navy", "background is 'navy'"), ("#fff", "background is")):
        with pytest.raises(PictureError, match=said):
            Look(background=wrong).paper()


# ---- views


@pytest.mark.parametrize(
    ("words", "expected"),
    [
        ("from +x", (1, 0, 0)),
        ("-y", (0, -1, 0)),
        ("from z", (0, 0, 1)),
        ("From Above", (0, 0, 1)),
        ("below", (0, 0, -1)),
        ("3, 0, -4", (0.6, 0, -0.8)),
        ("(0 2 0)", (0, 1, 0)),
    ],
)
def test_views_in_words_and_numbers(words: str, expected: tuple[float, float, float]) -> None:
    assert_allclose(direction_from(words, UP), expected, atol=1e-15)


def test_above_is_against_gravity() -> None:
    assert_allclose(direction_from("from above", np.array([0.0, 2.0, 0.0])), [0, 1, 0])


@pytest.mark.parametrize("words", ["sideways", "0, 0, 0", "1, 2", "nan, 0, 1", "from", "", "from +w", "1e999, 0, 0"])
def test_a_view_that_is_none_is_refused(words: str) -> None:
    with pytest.raises(PictureError, match=r"the view is .*from above"):
        direction_from(words, UP)


@pytest.mark.parametrize("axis", range(3))
@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_a_view_along_what_is_up_has_axes_too(axis: int, sign: float) -> None:
    toward = sign * np.eye(3)[axis]
    axes = axes_for(toward, np.eye(3)[axis])
    assert_allclose(axes @ axes.T, np.eye(3), atol=1e-15)
    assert_allclose(np.cross(axes[0], axes[1]), toward, atol=1e-15)
    # from above a plan is as on paper: x to the right, y up
    if axis == 2 and sign > 0:
        assert_allclose(axes, np.eye(3), atol=1e-15)


def test_the_picture_is_seen_from_where_it_was_asked(tmp_path: Path) -> None:
    # an end of the duct is blue, 1 m by 1 m; from the side it is a line
    bare = replace(box_scene(), arrows=(), markers=())

    def blue(view: str) -> float:
        draw_picture(bare, tmp_path / "a.png", Look(size=SMALL, view=view))
        with Image.open(tmp_path / "a.png") as image:
            seen = np.asarray(image.convert("RGB")).astype(int)[60:420, :480]
        return float(((seen[..., 2] - seen[..., 0]) > 40).mean())

    assert blue("from -x") > 0.05
    assert blue("from +y") < 0.02


# ---- which forces


def test_forces_left_out_by_choice_are_named(tmp_path: Path) -> None:
    scene = box_scene()
    some = only_kinds(scene, ["reaction", "resultant"])
    assert [arrow.kind for arrow in some.arrows] == ["resultant", "reaction"]
    assert some.notes[0].startswith("By choice not all forces are shown. Left out: pressure force at feed, ")
    assert some.notes[1:] == scene.notes
    assert only_kinds(scene, ARROW_KINDS) is scene
    assert set(SHOWN.values()) == set(ARROW_KINDS)
    assert "reaction, force (-1000, 0, 900) N." in in_words(some)
    assert "pressure force" not in in_words(replace(some, notes=()))


# ---- nothing hides anything


def covered(item: DrawnArrow) -> np.ndarray:
    if item.end_on:
        return item.start[None]
    return item.start + np.linspace(0.0, 1.0, 60)[:, None] * (item.end - item.start)


@pytest.mark.parametrize("branches", [2, 8, pytest.param(12, marks=pytest.mark.long)])
def test_no_label_lies_over_an_arrow_or_another_label(
    branches: int, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    found: dict[str, Any] = {}
    place, overlay = picture_overlay.place_labels, picture_overlay._draw_labels

    def placing(*args: Any, **options: Any) -> np.ndarray:
        found["places"] = place(*args, **options)
        return found["places"]

    def labelling(sheet: Any, labels: Any, *rest: Any) -> None:
        found["labels"] = labels
        overlay(sheet, labels, *rest)

    cover = picture_overlay._covering

    def covering(item: DrawnArrow, unit: float) -> Any:
        found.setdefault("arrows", []).append(item)
        return cover(item, unit)

    monkeypatch.setattr(picture_overlay, "place_labels", placing)
    monkeypatch.setattr(picture_overlay, "_draw_labels", labelling)
    monkeypatch.setattr(picture_overlay, "_covering", covering)
    scene = comb(branches)
    draw_picture(scene, tmp_path / "a.png")
    places = found["places"]
    for item in found["arrows"]:
        # what is kept free covers the arrow from end to end
        boxes, at = np.array(cover(item, 1.0)), covered(item)
        held = (at[:, None] >= boxes[None, :, :2] - 1e-9).all(axis=2) & (at[:, None] <= boxes[None, :, 2:] + 1e-9).all(
            axis=2
        )
        assert held.any(axis=1).all(), item.tag
    # every force that is drawn, every port and every marker has its label
    assert np.isfinite(places).all()
    assert len(places) == len(scene.arrows) + branches + 2
    for i, one in enumerate(places):
        for two in places[i + 1 :]:
            assert max(two[0] - one[2], one[0] - two[2], two[1] - one[3], one[1] - two[3]) > 0.0
        for item in found["arrows"]:
            at = covered(item)
            inside = (at > one[:2]).all(axis=1) & (at < one[2:]).all(axis=1)
            assert not inside.any(), item.tag


def test_parallel_forces_at_one_place_lie_side_by_side() -> None:
    at = np.array([1.0, 0.5, 0.5])
    forces = [(900.0, 0, 0), (850.0, 0, 0), (-800.0, 0, 0), (780.0, 1.0, 0)]
    arrows = tuple(Arrow("weight", f"w{k}", "a on b", at, np.array(f)) for k, f in enumerate(forces))
    items, _ = laid_out(replace(box_scene(), arrows=arrows, markers=()), np.array([0.0, -1.0, 0.2]))
    least = ARROW_STYLES["weight"].head_width
    for i, one in enumerate(items):
        for two in items[i + 1 :]:
            assert np.linalg.norm(covered(one)[:, None] - covered(two)[None], axis=-1).min() >= least


def test_an_arrow_steps_aside_for_a_marker_that_is_not_its_own() -> None:
    scene = box_scene()
    weight = Arrow("weight", "w", "a on b", np.array([1.0, 0.5, 0.5]), np.array([0.0, 0.0, -900.0]))
    below = Marker("anchor", "anchor", np.array([1.0, 0.5, 0.2]))
    toward = np.array([0.0, -1.0, 0.0])
    items, view = laid_out(replace(scene, arrows=(weight,), markers=(below,)), toward)
    away = np.linalg.norm(covered(items[0]) - view.project(below.at), axis=1).min()
    assert away > 0.5 * ARROW_STYLES["weight"].head_width
    # its own place is no obstacle
    items, view = laid_out(replace(scene, arrows=(weight,), markers=(replace(below, at=weight.at),)), toward)
    assert_allclose(items[0].start, view.project(weight.at), atol=1e-9)


def test_zero_and_tiny_forces_and_none_at_all(tmp_path: Path) -> None:
    at = np.array([1.0, 0.5, 0.5])
    arrows = tuple(Arrow("weight", "w", "a on b", at, np.array([0.0, 0.0, f])) for f in (0.0, 1e-300, -1e-12))
    for k, some in enumerate((arrows, arrows[:1], ())):
        draw_picture(replace(box_scene(), arrows=some), tmp_path / f"{k}.png", Look(size=SMALL))
    items, _ = laid_out(replace(box_scene(), arrows=arrows))
    assert [item.drawn for item in items] == [False, False, True]


def test_long_names_keep_both_their_ends() -> None:
    ruler = Ruler()
    names = [f"a very long name that all the branches of the distributor share, {k}" for k in (1, 2)]
    short = [ruler.shorten(name, 18.0, 200.0) for name in names]
    assert short[0] != short[1]
    for name, cut in zip(names, short):
        assert ruler.width(cut, 18.0) <= 200.0
        first, last = cut.split("…")
        assert name.startswith(first)
        assert name.endswith(last)
    assert ruler.shorten("feed", 18.0, 200.0) == "feed"
    assert ruler.shorten("feed", 18.0, 0.0) == "…"


def test_the_label_of_a_ring_hangs_on_the_ring() -> None:
    # two flat ends as one group: the middle of the group lies between them
    scene = replace(box_scene(), groups=(("shell", "wall"), ("ends", "symmetry"), ("x", "outlet")), arrows=())
    scene = replace(scene, group_of_triangle=np.minimum(scene.group_of_triangle, 1))
    port = find_ports(scene)[0]
    _, view = laid_out(scene, np.array([1.0, -1.0, 0.5]))
    rims = [view.project(rim) for rim in port.rims]
    place = picture_overlay.clear_place(port, view, rims, view.project(port.centroid))
    near = view.project(np.array([2.0, 0.5, 0.5]))  # the middle of the end that is turned to the viewer
    assert np.linalg.norm(place - near) < 0.3 * view.scale
    label = picture_overlay._port_label(Sheet((1600, 1200)), port, view, view.project(port.centroid), rims, True)
    assert (label.anchor == place).all()


# ---- the legend


def test_the_chain_line_is_that_of_the_reaction() -> None:
    scene = comb(2)
    items, view = laid_out(scene)
    chain = chained(items)
    assert chain.tag == "R"
    step = chain.line[1] - chain.line[0]
    away = view.project(scene.arrows[-1].through) - chain.line[0]
    assert abs(step[0] * away[1] - step[1] * away[0]) < 1e-6 * np.linalg.norm(step)
    assert _remarks(items)[-1] == "Chain line: line of action of the reaction R."
    turning = replace(scene, arrows=(*scene.arrows[:-1], replace(scene.arrows[-1], couple=-12.5)))
    assert _remarks(laid_out(turning)[0])[-1].endswith("reaction R, with a couple of \u221212.50 N·m about it.")
    without = replace(scene, arrows=scene.arrows[:-1])
    assert _remarks(laid_out(without)[0])[-1] == "Chain line: line of action of the load L."
    unknown = replace(scene, arrows=(*scene.arrows[:-1], replace(scene.arrows[-1], through=None)))
    assert _remarks(laid_out(unknown)[0])[-1] == "The line of action of the reaction R is not known."
    far = replace(scene, arrows=(*scene.arrows[:-1], replace(scene.arrows[-1], through=np.array([0.0, 90.0, 0.0]))))
    assert _remarks(laid_out(far)[0])[-1].endswith("passes farther out than is shown.")


def test_the_legend_says_that_momentum_is_turned() -> None:
    said = " ".join(_remarks(laid_out(comb(2))[0]))
    assert "forces on the fluid" in said
    assert "minus the “momentum out” of the tables" in said


def test_the_scene_of_a_balance_has_the_line_of_the_reaction(block: Block) -> None:
    block.write()
    done = run_case(read_case(block.case))
    arrows = {arrow.kind: arrow for arrow in arrows_of(done.balance)}
    # weights of 1 m³ of water and of 2 kg of hardware at the middle: the line goes up through it
    assert_allclose(arrows["reaction"].through, [0.5, 0.5, 0.5], atol=1e-9)
    assert arrows["reaction"].couple == 0.0
    # the scene has what the table has, turned
    table = done.balance.momentum.group_flux[1]
    momentum = [arrow for arrow in arrows_of(done.balance) if arrow.kind == "momentum"]
    assert_allclose(momentum[1].vector, -table)
    axis = replace(done.balance.reaction.line_of_action, point=np.full(3, np.nan), couple=float("nan"))
    unknown = replace(done.balance, reaction=replace(done.balance.reaction, line_of_action=axis))
    scene = scene_of("t", done.surface, done.flow, unknown)
    assert next(arrow for arrow in scene.arrows if arrow.kind == "reaction").through is None


# ---- the command


def test_a_picture_of_a_case(block: Block, tmp_path: Path) -> None:
    block.write()
    assert picture_of_case(block.case) == Path("results/block/picture.png")
    assert (tmp_path / "results/block/picture.png").exists()
    to = tmp_path / "own.svg"
    made = picture_of_case(block.case, to=to, show="reaction, load", view="from +y", size="900x700", colours="pressure")
    assert made == to
    text = to.read_text(encoding="utf-8")
    assert ">gauge pressure, " in text
    assert ">pressure at feed<" not in text
    assert "By choice not all forces are shown" in text


@pytest.mark.parametrize(
    ("wish", "said"),
    [
        ({"to": Path("a.gif")}, r"'a\.gif'\. Name a file that ends in \.png, \.svg, \.pdf"),
        ({"size": "big"}, "the size is 'big'"),
        ({"size": "100x100"}, "100 by 100 pixels has no room"),
        ({"size": "9000x900"}, "too large"),
        ({"show": "pressure,lift"}, "'lift' cannot be shown"),
        ({"view": "sideways"}, "the view is 'sideways'"),
        ({"background": "#000000"}, "too dark"),
        ({"colours": "rainbow"}, "the colours are 'rainbow'"),
    ],
)
def test_a_wish_that_cannot_be_had_is_said_before_any_work(
    block: Block, wish: dict[str, Any], said: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    def never(case: object) -> None:
        raise AssertionError("the case was run")

    monkeypatch.setattr("fluxmesh.job.done.done_case", never)
    with pytest.raises(PictureError, match=said):
        picture_of_case(block.case, **wish)
    assert not Path("results").exists()


def test_a_case_at_fault_gives_no_picture(block: Block, tmp_path: Path) -> None:
    block.change('array = "p"', 'array = "q"')
    with pytest.raises(FieldError, match="'q'"):
        picture_of_case(block.case, to=tmp_path / "a.png")
    assert not (tmp_path / "a.png").exists()


def test_the_command_as_it_is_called(fluxmesh: Callable[..., Any], block: Block, tmp_path: Path) -> None:
    block.write(CASE.replace("[groups.feed]", "[groups.'<b>feed</b>']").replace('title = "Block"', "title = '<i>t'"))
    ran = fluxmesh(
        "picture", block.case, "--to", tmp_path / "a.pdf", "--view", "from above", "--size", "900x700",
        "--background", "transparent", "--show", "reaction",
    )  # fmt: skip
    assert ran.code == 0, ran.err
    assert f"Written: {tmp_path / 'a.pdf'}" in ran.out
    ran = fluxmesh("picture", block.case, "--view", "sideways")
    assert ran.code == 2
    assert ran.err.startswith("fluxmesh: the view is 'sideways'. Give ")
    assert ran.err.count("\n") == 1
    assert "--background" in fluxmesh("picture", "--help").out


def test_the_letters_of_a_pdf_can_be_read_back(tmp_path: Path) -> None:
    from pypdf import PdfReader

    draw_picture(replace(box_scene(), title="<b>Rinse & header</b>"), tmp_path / "a.pdf", Look(size=SMALL))
    said = "\n".join(page.extract_text() for page in PdfReader(tmp_path / "a.pdf").pages)
    assert "<b>Rinse & header</b>" in said
    assert "pressure force at feed" in said
    assert "3.000 kN" in said


def test_names_are_cleaned_but_a_path_is_checked_first() -> None:
    assert clean_text("a\nb") == "a b"
    with pytest.raises(PictureError, match="ends in"):
        require_drawable(Path("a"), Look())
