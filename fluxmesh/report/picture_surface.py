"""The surface itself, drawn offscreen by VTK to an image array; and whether that works here."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from fluxmesh.errors import PictureError
from fluxmesh.report.picture_view import View
from fluxmesh.report.scene import merge_points

__all__ = ["Layer", "draw_surface", "offscreen_problem", "require_offscreen"]

# Drawn finer than shown by this factor and averaged down: smooth edges on any driver.
_FINER = 2
# An edge is drawn where neighbouring facets turn by more than this angle in degrees.
_CREASE = 38.0
# A surface with more creases than this share of its triangles is rough, not edged: creases would blacken it.
_MOST_CREASES = 0.08
# Lines that hang together over less than this share of the picture's half height are not drawn.
_SPECK = 0.08
_CREASE_GREY = (90, 90, 90)
_OUTLINE_GREY = (64, 64, 64)
# Sheets of translucent surface one behind another that are told apart.
_PEELS = 6
_PROBE_SECONDS = 60.0
_NO_IMPORT = 3
_NO_WINDOW = 4

# A window that cannot be made may end the process, so it is tried in one of its own.
_PROBE = f"""
import sys
try:
    import matplotlib, pyvista
except ImportError as error:
    print(error)
    sys.exit({_NO_IMPORT})
plotter = pyvista.Plotter(off_screen=True, window_size=(32, 32))
plotter.set_background("white")
plotter.render_window.SetMultiSamples(0)
plotter.add_mesh(pyvista.Plane(), color="black", lighting=False, opacity=0.9)
plotter.enable_depth_peeling(4, 0.0)
image = plotter.screenshot(return_img=True)
sys.exit(0 if image.min() < 64 else {_NO_WINDOW})
"""


@dataclass(frozen=True, eq=False)
class Layer:
    """Triangles that are drawn alike.

    Attributes
    ----------
    members : ndarray, shape (n,), int64
        Indices of the triangles.
    colours : ndarray, shape (3,) or (m, 3), uint8
        One colour, or one for each of m equal bands of the values.
    opacity : float
        1 for a surface that hides what is behind it, 0 for the rim alone.
    values : ndarray, shape (n,), float64, or None
        A value of each triangle, drawn as the mean of those around each point.
    limits : tuple of float
        Lower limit of the first band and upper limit of the last.
    rim : tuple of int, or None
        Colour of the line around the layer; None for no line.
    """

    members: NDArray[np.int64]
    colours: NDArray[np.uint8]
    opacity: float
    values: NDArray[np.float64] | None = None
    limits: tuple[float, float] = (0.0, 1.0)
    rim: tuple[int, int, int] | None = None


@cache
def offscreen_problem() -> str:
    """Try an offscreen window in a process of its own, once.

    Returns
    -------
    str
        Empty when pictures can be drawn, else what stands in the way.
    """
    try:
        done = subprocess.run(
            [sys.executable, "-P", "-c", _PROBE],
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
            timeout=_PROBE_SECONDS,
            check=False,
        )
    except subprocess.TimeoutExpired:
        return f"an offscreen window did not open within {_PROBE_SECONDS:.0f} s"
    except OSError as error:
        return f"the trial of an offscreen window could not be started ({error.strerror})"
    if done.returncode == 0:
        return ""
    if done.returncode == _NO_IMPORT:
        reason = " ".join(done.stdout.decode(errors="replace").split())
        return f"the drawing library cannot be loaded ({reason})"
    return "no OpenGL library gives an offscreen window"


def require_offscreen() -> None:
    """Raise PictureError, with what to install, where no picture can be drawn."""
    problem = offscreen_problem()
    if problem:
        raise PictureError(
            f"pictures cannot be drawn: {problem}",
            remedy="Install pyvista and matplotlib, and an OpenGL library with a software renderer (Debian, Ubuntu: "
            "apt-get install libgl1 libegl1 libgl1-mesa-dri); the numbers do not depend on it",
        )


@contextmanager
def _quiet() -> Iterator[None]:
    """Keep what graphics drivers write to the error stream off the terminal."""
    sys.stderr.flush()
    kept = os.dup(2)
    nowhere = os.open(os.devnull, os.O_WRONLY)
    try:
        os.dup2(nowhere, 2)
        yield
    finally:
        os.dup2(kept, 2)
        os.close(kept)
        os.close(nowhere)


def draw_surface(
    points: NDArray[np.float64],
    triangles: NDArray[np.int64],
    layers: Sequence[Layer],
    view: View,
    area: tuple[int, int, int, int],
    line_width: float,
    paper: tuple[int, int, int] | None = (255, 255, 255),
) -> NDArray[np.uint8]:
    """Draw a surface on plain paper, or on none.

    Parameters
    ----------
    points : ndarray, shape (n_points, 3), float64
        Coordinates in metres.
    triangles : ndarray, shape (n_triangles, 3), int64
        Point indices.
    layers : sequence of Layer
        What to draw of it, and how.
    view : View
        The projection onto the picture.
    area : tuple of int
        Left, bottom, right, top of the image within the picture, in pixels.
    line_width : float
        Width of creases in pixels; rims are twice as wide.
    paper : tuple of int, or None, optional
        Red, green and blue of the paper up to 255; white by default.

    Returns
    -------
    ndarray, shape (top - bottom, right - left, 3 or 4), uint8
        First row at the top; with a fourth value, the opacity, where there is no paper.

    Raises
    ------
    PictureError
        No offscreen window can be had.
    """
    require_offscreen()
    import pyvista

    left, bottom, right, top = area
    merged, joined = merge_points(points, triangles)
    # In units of the picture's half height about its middle: single precision in the driver is then enough.
    half = 0.5 * (top - bottom) / view.scale
    offset = (np.array([0.5 * (left + right), 0.5 * (bottom + top)]) - view.middle) / view.scale
    local = ((merged - view.centre) @ view.axes.T - np.array([*offset, 0.0])) / half
    with _quiet():
        plotter = pyvista.Plotter(
            off_screen=True, window_size=(_FINER * (right - left), _FINER * (top - bottom)), lighting="none"
        )
        try:
            # the averaging smooths edges; samples of the driver's own would spoil the peeling
            plotter.render_window.SetMultiSamples(0)
            for position, strength in (((-0.5, 0.8, 1.2), 0.75), ((0.8, -0.2, 0.6), 0.25)):
                light = pyvista.Light(position=position, intensity=strength, light_type="camera light")
                plotter.add_light(light)
            # peeling and camera before any layer: adding one does not draw, or measure, the ones before
            if any(layer.opacity < 1.0 for layer in layers):
                plotter.enable_depth_peeling(number_of_peels=_PEELS, occlusion_ratio=0.0)
            _set_camera(plotter, float(np.abs(local).max()))
            for layer in layers:
                _add_layer(plotter, local, joined[layer.members], layer, _FINER * line_width)
            papers = [paper] if paper is not None else [(255, 255, 255), (0, 0, 0)]
            images = [_shot(plotter, one, right - left, top - bottom) for one in papers]
        finally:
            plotter.close()
    if paper is not None:
        return np.asarray(np.round(images[0]), dtype=np.uint8)
    return _lifted(*images)


def _shot(plotter: Any, paper: tuple[int, int, int], width: int, height: int) -> NDArray[np.float64]:
    """Return the image on one paper, averaged down to its size, shape (height, width, 3), up to 255."""
    plotter.set_background([value / 255.0 for value in paper])
    plotter.render()
    fine = np.asarray(plotter.screenshot(return_img=True), dtype=np.float64)[: _FINER * height, : _FINER * width, :3]
    return np.asarray(fine.reshape(height, _FINER, width, _FINER, 3).mean(axis=(1, 3)))


def _lifted(on_white: NDArray[np.float64], on_black: NDArray[np.float64]) -> NDArray[np.uint8]:
    """Return the image off its paper: what a pixel lets through of white it does not let through of black."""
    opacity = np.clip(1.0 - (on_white - on_black).max(axis=2) / 255.0, 0.0, 1.0)
    colour = on_black / np.maximum(opacity, 1.0 / 255.0)[..., None]
    found = np.concatenate([np.clip(colour, 0.0, 255.0), 255.0 * opacity[..., None]], axis=2)
    return np.asarray(np.round(found), dtype=np.uint8)


def _set_camera(plotter: Any, reach: float) -> None:
    """Look along the third axis at all within the reach, without perspective."""
    camera, depth = plotter.camera, 2.0 * reach + 1.0
    camera.position, camera.focal_point, camera.up = (0.0, 0.0, depth), (0.0, 0.0, 0.0), (0.0, 1.0, 0.0)
    camera.parallel_projection, camera.parallel_scale = True, 1.0
    camera.clipping_range = (0.1 * depth, 2.0 * depth)
    plotter.camera_set = True


def _add_layer(
    plotter: Any, points: NDArray[np.float64], triangles: NDArray[np.int64], layer: Layer, width: float
) -> None:
    """Add one layer, its creases and its rim."""
    import pyvista

    used, numbered = np.unique(triangles, return_inverse=True)
    patch = pyvista.PolyData.from_regular_faces(points[used], numbered.reshape(-1, 3))
    if layer.rim is not None:
        rim = _without_specks(
            patch.extract_feature_edges(
                boundary_edges=True, feature_edges=False, non_manifold_edges=False, manifold_edges=False
            )
        )
        _add_lines(plotter, rim, layer.rim, 2.0 * width)
    if layer.opacity == 0.0:
        return
    look: dict[str, Any] = {"color": (layer.colours / 255.0).tolist(), "ambient": 0.55, "diffuse": 0.50}
    shown = patch
    if layer.values is not None:
        # Points are doubled at creases first: no mean over a sharp edge.
        shown = patch.compute_normals(
            cell_normals=False,
            split_vertices=True,
            feature_angle=_CREASE,
            consistent_normals=False,
            auto_orient_normals=False,
        )
        # mostly even light, so that a colour can be compared with its bar
        look = {"scalars": _point_means(shown.regular_faces, layer.values), "clim": layer.limits}
        look |= {
            "cmap": [f"#{r:02x}{g:02x}{b:02x}" for r, g, b in layer.colours],
            "ambient": 0.82,
            "diffuse": 0.22,
        }
    plotter.add_mesh(
        shown,
        opacity=layer.opacity,
        specular=0.0,
        smooth_shading=False,
        show_scalar_bar=False,
        render=False,
        reset_camera=False,
        **look,
    )
    _add_lines(plotter, _creases(patch), _CREASE_GREY, width)
    _add_lines(plotter, _outlines(patch), _OUTLINE_GREY, 1.5 * width)


def _add_lines(plotter: Any, lines: Any, colour: tuple[int, int, int], width: float) -> None:
    if lines is not None:
        look = {"color": [value / 255.0 for value in colour], "line_width": width, "lighting": False}
        plotter.add_mesh(lines, render=False, reset_camera=False, **look)


def _creases(patch: Any) -> Any:
    """Return the sharp edges of a patch as lines, or None where it has none worth drawing."""
    edges = patch.extract_feature_edges(
        feature_angle=_CREASE, boundary_edges=False, non_manifold_edges=False, manifold_edges=False
    )
    if not 0 < edges.n_cells <= max(200.0, _MOST_CREASES * patch.n_cells):
        return None
    return _without_specks(edges)


def _outlines(patch: Any) -> Any:
    """Return the lines where a patch turns away from the viewer, or None where there are none."""
    import pyvista
    from vtkmodules.vtkFiltersHybrid import vtkPolyDataSilhouette

    outline = vtkPolyDataSilhouette()
    outline.SetInputData(patch)
    # the viewer of a parallel projection stands in one direction, whatever the point
    outline.SetDirectionToSpecifiedVector()
    outline.SetVector(0.0, 0.0, 1.0)
    outline.SetEnableFeatureAngle(False)
    outline.Update()
    lines = pyvista.wrap(outline.GetOutput())
    return _without_specks(lines)


def _without_specks(lines: Any) -> Any:
    """Return the lines that go on for a while, or None: folds of single facets, as thinning makes them, do not."""
    if not lines.n_cells:
        return None
    lines = lines.connectivity("all")
    ends = lines.points[lines.lines.reshape(-1, 3)[:, 1:]]
    piece = lines.cell_data["RegionId"]
    reach = np.bincount(piece, weights=np.linalg.norm(ends[:, 1] - ends[:, 0], axis=1))
    kept = np.flatnonzero(reach[piece] > _SPECK)
    return lines.extract_cells(kept) if kept.size else None


def _point_means(triangles: NDArray[np.int64], values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return at each point the mean value of the triangles around it."""
    corners = triangles.ravel()
    return np.asarray(np.bincount(corners, weights=np.repeat(values, 3)) / np.bincount(corners))
