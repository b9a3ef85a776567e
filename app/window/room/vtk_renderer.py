"""Frames drawn by VTK into a window that is never shown. The one place where VTK is known.

The widget paints the picture itself: that holds up on every platform of Qt, where windows of VTK inside Qt do not.
Importing this module loads VTK.
"""

from dataclasses import dataclass

import numpy as np
import vtkmodules.vtkRenderingOpenGL2  # noqa: F401  # registers what draws
from numpy.typing import NDArray
from PySide6.QtGui import QImage
from vtkmodules.util.numpy_support import numpy_to_vtk, numpy_to_vtkIdTypeArray, vtk_to_numpy
from vtkmodules.vtkCommonCore import vtkPoints, vtkUnsignedCharArray
from vtkmodules.vtkCommonDataModel import vtkCellArray, vtkPolyData
from vtkmodules.vtkCommonMath import vtkMatrix4x4
from vtkmodules.vtkRenderingCore import (
    vtkActor,
    vtkLight,
    vtkPolyDataMapper,
    vtkRenderer,
    vtkRenderWindow,
)

from app.window.room.camera import Camera
from app.window.room.rendering import LIGHT_AT, SHINE, SHINE_POWER, DisplayMesh, DrawnSurface, Frame

_FINE_SAMPLES = 4


@dataclass(eq=False)
class _Actors:
    """What draws one surface: its faces, and the lines on it."""

    faces: vtkActor
    edges: vtkActor | None
    matrix: vtkMatrix4x4
    drawn: DrawnSurface | None = None


class VtkRenderer:
    """A renderer on an off-screen window of VTK.

    Where there is no OpenGL at all VTK may end the process: `opengl_probe` tries it in another one first.
    """

    def __init__(self) -> None:
        self._window = vtkRenderWindow()
        if hasattr(self._window, "SetConnectContextToNSView"):
            # On macOS an off-screen window would otherwise want a view of the application's main thread.
            self._window.SetConnectContextToNSView(False)
        self._window.SetOffScreenRendering(1)
        self._window.SetMultiSamples(0)
        self._window.SetAlphaBitPlanes(1)
        self._renderer = vtkRenderer()
        self._renderer.SetGradientBackground(True)
        self._renderer.AutomaticLightCreationOff()
        # See-through parts have no back faces: drawn one after the other they look right, and sorting pixels is dear.
        self._renderer.SetUseOIT(False)
        self._window.AddRenderer(self._renderer)
        light = vtkLight()
        light.SetLightTypeToCameraLight()
        light.SetPosition(*LIGHT_AT)
        light.SetFocalPoint(0.0, 0.0, 0.0)
        self._renderer.AddLight(light)
        self._actors: dict[tuple[int, int], _Actors] = {}

    def draw(self, frame: Frame) -> QImage:
        """Return the picture of the frame, of its size, opaque."""
        self._update_actors(frame.surfaces)
        self._update_camera(frame)
        self._renderer.SetBackground(*frame.bottom)
        self._renderer.SetBackground2(*frame.top)
        if self._window.GetSize() != (frame.width, frame.height):
            self._window.SetSize(frame.width, frame.height)
        samples = _FINE_SAMPLES if frame.fine else 0
        if self._window.GetMultiSamples() != samples:
            self._window.SetMultiSamples(samples)
        self._window.Render()
        return self._picture(frame.width, frame.height)

    def hardware(self) -> str:
        """Return what the driver says that it draws with, after the first picture."""
        lines = self._window.ReportCapabilities().splitlines()
        return next((line.split(":", 1)[1].strip() for line in lines if line.startswith("OpenGL renderer")), "")

    def close(self) -> None:
        """Give back window and graphics memory; the renderer is not used afterwards."""
        self._renderer.RemoveAllViewProps()
        self._actors.clear()
        self._window.Finalize()

    def _update_camera(self, frame: Frame) -> None:
        camera = self._renderer.GetActiveCamera()
        camera.SetPosition(*frame.camera.eye())
        camera.SetFocalPoint(*frame.camera.focus)
        camera.SetViewUp(*frame.camera.axes()[1])
        camera.SetViewAngle(frame.camera.view_angle_deg)
        camera.SetClippingRange(frame.near_mm, frame.far_mm)

    def _update_actors(self, surfaces: tuple[DrawnSurface, ...]) -> None:
        seen: dict[int, int] = {}
        wanted: dict[tuple[int, int], DrawnSurface] = {}
        for surface in surfaces:
            # One mesh may be drawn more than once.
            repeat = seen.get(id(surface.mesh), 0)
            seen[id(surface.mesh)] = repeat + 1
            wanted[id(surface.mesh), repeat] = surface
        for key in [key for key in self._actors if key not in wanted]:
            gone = self._actors.pop(key)
            self._renderer.RemoveActor(gone.faces)
            if gone.edges is not None:
                self._renderer.RemoveActor(gone.edges)
        for key, surface in wanted.items():
            if key not in self._actors:
                self._actors[key] = self._made(surface.mesh)
            _show(self._actors[key], surface)

    def _made(self, mesh: DisplayMesh) -> _Actors:
        matrix = vtkMatrix4x4()
        faces = _actor(_surface_data(mesh), matrix)
        faces.GetMapper().SetResolveCoincidentTopologyToPolygonOffset()
        faces.GetProperty().BackfaceCullingOn()
        faces.GetProperty().SetInterpolationToPhong()
        edges = None
        self._renderer.AddActor(faces)
        if len(mesh.edges):
            edges = _actor(_line_data(mesh.edges), matrix)
            edges.GetMapper().SetResolveCoincidentTopologyToPolygonOffset()
            edges.GetMapper().SetRelativeCoincidentTopologyLineOffsetParameters(-2.0, -4.0)
            edges.GetProperty().LightingOff()
            self._renderer.AddActor(edges)
        return _Actors(faces, edges, matrix)

    def _picture(self, width: int, height: int) -> QImage:
        pixels = vtkUnsignedCharArray()
        self._window.GetRGBACharPixelData(0, 0, width - 1, height - 1, 0, pixels, 0)
        rows: NDArray[np.uint8] = vtk_to_numpy(pixels).reshape(height, width, 4)  # type: ignore[no-untyped-call]
        # OpenGL counts rows from below.
        upright = np.ascontiguousarray(rows[::-1])
        image = QImage(upright.data, width, height, 4 * width, QImage.Format.Format_RGBX8888)
        return image.convertToFormat(QImage.Format.Format_RGB32)


def _show(actors: _Actors, surface: DrawnSurface) -> None:
    """Bring the actors to what the surface says, touching only what differs: each touch costs a part of the frame."""
    drawn = actors.drawn
    if drawn is None or not np.array_equal(drawn.matrix, surface.matrix):
        actors.matrix.DeepCopy(surface.matrix.ravel().tolist())
    if drawn is None or _look(drawn) != _look(surface):
        _paint_faces(actors.faces, surface)
        if actors.edges is not None:
            actors.edges.SetVisibility(surface.edge_colour is not None)
            actors.edges.GetProperty().SetColor(*(surface.edge_colour or surface.colour))
            actors.edges.GetProperty().SetOpacity(surface.opacity)
    actors.drawn = surface


def draws(renderer: VtkRenderer) -> bool:
    """Tell whether a picture comes out as it should: white above, black below."""
    camera = Camera(np.zeros(3), 1000.0, 0.0, 0.0)
    frame = Frame(16, 16, camera, 10.0, 5000.0, (1.0, 1.0, 1.0), (0.0, 0.0, 0.0))
    image = renderer.draw(frame)
    return image.pixelColor(8, 0).lightness() > 200 and image.pixelColor(8, 15).lightness() < 55


def is_software(hardware: str) -> bool:
    """Tell whether a driver of that name draws on the processor: names that drivers give themselves, from memory."""
    name = hardware.lower()
    return any(
        word in name for word in ("llvmpipe", "softpipe", "swrast", "software", "swiftshader", "gdi generic", "warp")
    )


def _look(surface: DrawnSurface) -> tuple[object, ...]:
    return surface.colour, surface.opacity, surface.light, surface.edge_colour


def _paint_faces(actor: vtkActor, surface: DrawnSurface) -> None:
    look = actor.GetProperty()
    look.SetColor(*surface.colour)
    look.SetOpacity(surface.opacity)
    look.SetAmbient(surface.ambient)
    look.SetDiffuse(surface.diffuse)
    look.SetSpecular(SHINE * surface.light)
    look.SetSpecularPower(SHINE_POWER)


def _actor(data: vtkPolyData, matrix: vtkMatrix4x4) -> vtkActor:
    mapper = vtkPolyDataMapper()
    mapper.SetInputData(data)
    if data.GetPointData().GetScalars() is None:
        mapper.ScalarVisibilityOff()
    actor = vtkActor()
    actor.SetMapper(mapper)
    actor.SetUserMatrix(matrix)
    return actor


def _surface_data(mesh: DisplayMesh) -> vtkPolyData:
    data = vtkPolyData()
    data.SetPoints(_points(mesh.points))
    cells = vtkCellArray()
    cells.SetData(3, _ids(mesh.triangles))
    data.SetPolys(cells)
    data.GetPointData().SetNormals(numpy_to_vtk(mesh.normals, deep=True))  # type: ignore[no-untyped-call]
    if mesh.colours is not None:
        bytes_ = np.round(255.0 * mesh.colours).astype(np.uint8)
        data.GetPointData().SetScalars(numpy_to_vtk(bytes_, deep=True))  # type: ignore[no-untyped-call]
    return data


def _line_data(edges: NDArray[np.float32]) -> vtkPolyData:
    data = vtkPolyData()
    data.SetPoints(_points(edges.reshape(-1, 3)))
    cells = vtkCellArray()
    cells.SetData(2, _ids(np.arange(2 * len(edges))))
    data.SetLines(cells)
    return data


def _points(points: NDArray[np.float32]) -> vtkPoints:
    made = vtkPoints()
    made.SetData(numpy_to_vtk(np.ascontiguousarray(points), deep=True))  # type: ignore[no-untyped-call]
    return made


def _ids(numbers: NDArray[np.integer]) -> object:
    flat = np.ascontiguousarray(numbers.ravel(), dtype=np.int64)
    return numpy_to_vtkIdTypeArray(flat, deep=True)  # type: ignore[no-untyped-call]
