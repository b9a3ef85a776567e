import numpy as np
import pytest

from app.window.room.opengl_probe import Graphics
from app.window.room.rendering import DisplayMesh, DrawnSurface
from app.window.room.scene_view import SceneView
from app.window.theme import LIGHT
from tests.app.window.scenes import graphics_here, pixels, scene_of
from tests.app.window.squares import BLUE, GREEN, RED, SIZE, flat, frame_of, square

pytestmark = pytest.mark.skipif(graphics_here() is Graphics.NONE, reason="no OpenGL here")


def drawn(*surfaces: DrawnSurface, fine: bool = False) -> np.ndarray:
    from app.window.room.vtk_renderer import VtkRenderer

    renderer = VtkRenderer()
    picture = pixels(renderer.draw(frame_of(*surfaces, fine=fine)))
    renderer.close()
    return picture


def test_a_square_covers_the_pixels_that_its_corners_enclose() -> None:
    picture = drawn(flat(square(0.0), RED))
    red = (picture == [255, 0, 0]).all(axis=2)
    assert red[31:69, 31:69].all()
    assert red.sum() == pytest.approx(40 * 40, abs=160)
    assert picture[0].min() > 250
    assert picture[-1].max() < 5


def test_nearer_hides_and_back_faces_are_not_drawn() -> None:
    picture = drawn(flat(square(100.0, 40.0), BLUE), flat(square(0.0), RED), flat(square(-50.0, away=True), GREEN))
    assert tuple(picture[50, 50]) == (255, 0, 0)
    assert tuple(picture[50, 25]) == (0, 0, 255)


def test_see_through_lets_see_through() -> None:
    picture = drawn(flat(square(100.0, 40.0), BLUE), flat(square(0.0), RED, 0.4))
    assert picture[50, 50] == pytest.approx([102, 0, 153], abs=6)


def test_one_renderer_follows_every_change() -> None:
    from app.window.room.vtk_renderer import VtkRenderer

    renderer = VtkRenderer()
    mesh = square(0.0)
    moved = np.eye(4)
    moved[0, 3] = 30.0
    coloured = DisplayMesh(mesh.points, mesh.normals, mesh.triangles, mesh.edges, np.tile(np.float32(GREEN), (4, 1)))

    def centre(*surfaces: DrawnSurface) -> tuple[int, ...]:
        return tuple(pixels(renderer.draw(frame_of(*surfaces)))[50, 50])

    nothing = centre()
    assert centre(flat(mesh, RED)) == (255, 0, 0)
    assert centre(flat(mesh, BLUE)) == (0, 0, 255)
    assert centre(DrawnSurface(mesh, moved, RED, light=0.0)) == nothing
    # The same mesh twice, at two places.
    assert centre(flat(mesh, RED), DrawnSurface(mesh, moved, BLUE, light=0.0)) == (255, 0, 0)
    assert centre(flat(coloured, RED)) == (0, 255, 0)
    assert centre() == nothing
    assert pixels(renderer.draw(frame_of(fine=True))).shape == (SIZE, SIZE, 3)
    renderer.close()


def test_it_names_what_it_draws_with_and_knows_software() -> None:
    from app.window.room.vtk_renderer import VtkRenderer, draws, is_software

    renderer = VtkRenderer()
    assert draws(renderer)
    assert is_software(renderer.hardware()) is (graphics_here() is Graphics.PROCESSOR)
    renderer.close()
    assert is_software("llvmpipe (LLVM 15.0.6, 256 bits)")
    assert is_software("GDI Generic")
    assert not is_software("Mesa Intel(R) UHD Graphics 620 (KBL GT2)")


@pytest.mark.parametrize("view_name", ["Three-quarter", "Beam's eye"])
def test_both_renderers_draw_the_same_room(qtbot: object, view_name: str) -> None:
    from app.window.room.painted_renderer import PaintedRenderer
    from app.window.room.vtk_renderer import VtkRenderer

    view = SceneView(LIGHT)
    qtbot.addWidget(view)  # type: ignore[attr-defined]
    view.resize(400, 300)
    view.set_scene(scene_of("c_arm_wide/head"))
    view.set_pose(40.0, 20.0)
    view.set_view(view_name)
    frame = view.frame(400, 300, fine=True)
    pictures = []
    for renderer in (PaintedRenderer(), VtkRenderer()):
        pictures.append(pixels(renderer.draw(frame)))
        renderer.close()
    off = np.abs(pictures[0] - pictures[1]).max(axis=2)
    assert off.mean() < 6.0
    assert (off > 40).mean() < 0.03
    assert np.ptp(pictures[0]) > 150
    view.shutdown()
