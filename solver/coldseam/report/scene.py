"""A look at a body in space: VTK paints the faces, matplotlib adds every line and letter.

The camera looks along a direction without perspective, so that a point's place on the picture is
a product of two vectors, and lines and labels drawn afterwards fall exactly where they belong. A
depth map decides which of them are hidden.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

PIXELS = 1100
"""Longer side of a painted picture."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Scene:
    """What a camera saw.

    Parameters
    ----------
    image
        RGBA, transparent where nothing is, shape (rows, columns, 4).
    low, high
        Corners of the picture in its plane, mm.
    right, up, toward
        Unit vectors of the picture: to the right, upwards, towards the eye.
    depth
        Height of the seen surface above the origin along ``toward``, m; NaN where nothing is.
    """

    image: np.ndarray
    low: np.ndarray
    high: np.ndarray
    right: np.ndarray
    up: np.ndarray
    toward: np.ndarray
    depth: np.ndarray

    def place(self, points: np.ndarray) -> np.ndarray:
        """Return where points (m, shape (..., 3)) fall on the picture, mm, shape (..., 2)."""
        return np.stack([points @ self.right, points @ self.up], axis=-1) * 1e3

    def visible(self, points: np.ndarray, slack: float) -> np.ndarray:
        """Return which points, shape (n, 3), are in the picture and not hidden by more than ``slack`` (m)."""
        rows, columns = self.depth.shape
        share = (self.place(points) - self.low) / (self.high - self.low)
        column = np.clip((share[:, 0] * columns).astype(int), 0, columns - 1)
        row = np.clip(((1 - share[:, 1]) * rows).astype(int), 0, rows - 1)
        shown = np.all((share >= 0) & (share <= 1), axis=1)
        return shown & (points @ self.toward >= self.farthest[row, column] - slack)

    @cached_property
    def farthest(self) -> np.ndarray:
        """Return the farthest depth seen next to every pixel, so that outlines count as seen; -inf at the rim."""
        from scipy.ndimage import minimum_filter

        return minimum_filter(np.where(np.isfinite(self.depth), self.depth, -np.inf), size=5)


def frame(toward: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return the picture's unit vectors right, up, toward, shape (3,) each, for an eye in a direction; z points up if it can."""
    toward = np.asarray(toward, dtype=float) / np.linalg.norm(toward)
    upright = np.array([0.0, 0.0, 1.0]) if abs(toward[2]) < 0.8 else np.array([0.0, 1.0, 0.0])
    right = np.cross(upright, toward)
    right /= np.linalg.norm(right)
    return right, np.cross(toward, right), toward


def paint(
    points: np.ndarray,
    facets: np.ndarray,
    toward: np.ndarray,
    *,
    values: np.ndarray | None = None,
    span: tuple[float, float] = (0.0, 1.0),
    colours: np.ndarray | None = None,
    front_only: bool = False,
    window: tuple[np.ndarray, np.ndarray] | None = None,
) -> Scene:
    """Paint triangles as an eye far away in the direction ``toward`` sees them.

    Parameters
    ----------
    points, facets
        m, shape (n, 3); outward oriented triangles, shape (f, 3).
    values, span
        Temperatures at the points and the range of the colour map; or
    colours
        RGB of every facet, 0-255, shape (f, 3).
    front_only
        Leave out faces that look away (to see into a cavity).
    window
        Corners of the part of the picture plane to show, m; all of it if None.
    """
    import pyvista

    from coldseam.report import style

    right, up, toward = frame(toward)
    used = np.unique(facets)
    flat = np.stack([points[used] @ right, points[used] @ up], axis=1)
    low, high = (flat.min(axis=0), flat.max(axis=0)) if window is None else window
    margin = 0.03 * max(high - low)
    low, high = low - margin, high + margin
    size = np.maximum((PIXELS * (high - low) / max(high - low)).astype(int), 60)
    high = low + size * (max(high - low) / max(size))  # square pixels
    centre = (low + high) / 2
    reach = float(np.ptp(points, axis=0).max()) * 4
    focus = centre[0] * right + centre[1] * up + toward * float((points[used] @ toward).mean())
    surface = pyvista.PolyData.from_regular_faces(np.asarray(points), np.asarray(facets))
    plotter = pyvista.Plotter(off_screen=True, window_size=size.tolist(), lighting="none")
    plotter.set_background("white")
    look: dict[str, Any] = {"show_scalar_bar": False, "culling": "back" if front_only else None}
    if values is not None:  # no light: a shade must mean a temperature and nothing else
        surface.point_data["T"] = np.asarray(values)
        plotter.add_mesh(surface, scalars="T", cmap=style.COLOUR_MAP, clim=span, lighting=False,
                         interpolate_before_map=True, n_colors=256, **look)  # fmt: skip
    else:
        plotter.add_light(pyvista.Light(position=focus + reach * (toward + 0.5 * up - 0.6 * right), focal_point=focus,
                                        light_type="scene light", intensity=1.0))  # fmt: skip
        surface.cell_data["colour"] = np.asarray(colours, dtype=np.uint8)
        plotter.add_mesh(surface, scalars="colour", rgb=True, ambient=0.8, diffuse=0.22, specular=0.0, **look)
    plotter.camera.position = focus + reach * toward
    plotter.camera.focal_point = focus
    plotter.camera.up = up
    plotter.enable_parallel_projection()
    plotter.camera.parallel_scale = float(high[1] - low[1]) / 2
    plotter.camera.clipping_range = (reach * 0.4, reach * 1.6)
    plotter.show(auto_close=False)
    image, depth = _read(plotter.render_window, size, plotter.camera.clipping_range)
    plotter.close()
    image = np.dstack([image, np.where(np.isfinite(depth), 255, 0).astype(np.uint8)])
    return Scene(image=image, low=low * 1e3, high=high * 1e3, right=right, up=up, toward=toward,
                 depth=depth + float((focus + reach * toward) @ toward))  # fmt: skip


def _read(window: Any, size: np.ndarray, clipping: tuple[float, float]) -> tuple[np.ndarray, np.ndarray]:
    """Return the colours and the depth (negative distance from the eye, NaN where nothing is) of a drawn window.

    Both are read from the window as it is: pyvista's own ways draw it anew for each.
    """
    from vtkmodules.util.numpy_support import vtk_to_numpy
    from vtkmodules.vtkCommonCore import vtkFloatArray, vtkUnsignedCharArray

    columns, rows = (int(n) for n in size)
    colours, nearness = vtkUnsignedCharArray(), vtkFloatArray()
    window.GetPixelData(0, 0, columns - 1, rows - 1, 0, colours, 0)
    window.GetZbufferData(0, 0, columns - 1, rows - 1, nearness)
    image = vtk_to_numpy(colours).reshape(rows, columns, -1)[::-1, :, :3].copy()
    share = vtk_to_numpy(nearness).reshape(rows, columns)[::-1].astype(float)
    depth = -(clipping[0] + share * (clipping[1] - clipping[0]))  # linear: there is no perspective
    return image, np.where(share >= 1.0, np.nan, depth)
