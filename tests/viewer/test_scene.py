"""The scene itself: pictures off screen, a window under Xvfb, and plain words where nothing can be drawn."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from sms_resource.viewer import ResultsError, ViewerUnavailable, open_scene, opengl
from sms_resource.viewer.opengl import drawing_with, find_drawing
from sms_resource.viewer.results import read_results
from sms_resource.viewer.scene import Scene, Settings
from tests.viewer.invented_results import write_results

HIDDEN = frozenset(("base", "body", "names"))


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("scene") / "results"
    write_results(path)
    return path


@pytest.fixture(scope="module")
def drawing() -> str:
    """Class of window that draws off screen here."""
    try:
        return find_drawing(window=False)
    except ViewerUnavailable as error:
        pytest.skip(f"no OpenGL library on this machine: {error}")


@pytest.fixture
def scene(folder: Path, drawing: str):  # type: ignore[no-untyped-def]
    from sms_resource.viewer.open import build_scene

    found = read_results(folder)
    with drawing_with(drawing):
        made = build_scene(
            found, Settings("cu_pct", 3.0, "cu_pct", 2.0, hidden=HIDDEN), off_screen=True, size=(500, 400)
        )
        yield made
        made.plotter.close()


def picture_of(scene: Scene) -> np.ndarray:
    scene.plotter.render()
    return np.asarray(scene.plotter.screenshot(return_img=True)).astype(float)


def test_screenshot_from_a_folder_somewhere_else(
    folder: Path, drawing: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Nothing but the folder is read: it is moved, and the working directory is another."""
    from PIL import Image

    monkeypatch.delenv("DISPLAY", raising=False)
    monkeypatch.chdir(tmp_path)
    shutil.copytree(folder, tmp_path / "moved")
    path = open_scene(
        "moved", screenshot="new/folder/shot.png", exaggeration=3.0, section=(40.0, 5.0), size=(600, 450)
    )
    assert path == Path("new/folder/shot.png")
    image = Image.open(path)
    assert image.size == (600, 450)
    colours = len({tuple(p) for p in np.asarray(image.convert("RGB")).reshape(-1, 3)[::7]})
    assert colours > 200  # shaded blocks, tubes, words and axes; a blank picture has one
    assert "VTK_DEFAULT_OPENGL_WINDOW" not in os.environ


def test_cutoff_moves_blocks_and_words(scene: Scene) -> None:
    before, picture = scene.shown, picture_of(scene)
    assert before == int((scene.results.blocks["cu_pct"] >= 3.0).sum())
    scene.change(cutoff=5.0)
    assert scene.shown == int((scene.results.blocks["cu_pct"] >= 5.0).sum()) < before
    words = scene.plotter.actors["words"].GetText(2)
    assert "Cu at or above 5 %" in words and "dry" in words and "Block-model tally" in words
    assert np.abs(picture_of(scene) - picture).max() > 50
    scene.change(cutoff=1e6)
    assert scene.shown == 0 and "0 t dry" in scene.plotter.actors["words"].GetText(2)
    assert "blocks" not in scene.plotter.actors
    scene.change(cutoff=3.0)
    assert scene.shown == before


def test_screens_take_blocks_and_tonnes(scene: Scene) -> None:
    whole = scene.tonnage().dry_tonnes
    scene.change(screened=True)
    frame = scene.results.blocks
    above = frame[frame["cu_pct"] >= 3.0]
    wanted = (above["dry_tonnes"] * above["kept_share"]).sum()
    assert scene.tonnage().dry_tonnes == pytest.approx(wanted) and wanted < whole
    assert scene.shown == int((above["kept_share"] > 0).sum())
    assert "after screens" in scene.plotter.actors["words"].GetText(2)


def test_section_hides_the_right_side_and_no_tonnes(scene: Scene) -> None:
    tonnes = scene.tonnage().dry_tonnes
    scene.change(section=(0.0, 0.0))  # looking north: what lies east goes
    middle = np.average(scene.results.blocks["easting"], weights=scene.results.blocks["volume_m3"])
    shown = scene.results.blocks[scene.visible()]
    assert shown["easting"].max() <= middle < scene.results.blocks["easting"].max()
    assert scene.tonnage().dry_tonnes == tonnes
    assert "tonnes are of the whole body" in scene.plotter.actors["words"].GetText(2)


def test_layers_are_shown_and_hidden(scene: Scene) -> None:
    assert "base" not in scene.plotter.actors and scene.plotter.actors["seafloor"].GetVisibility()
    scene.change(hidden=frozenset({"seafloor", "holes"}))
    actors = scene.plotter.actors
    assert not actors["seafloor"].GetVisibility() and not actors["holes-graded"].GetVisibility()
    assert actors["base"].GetVisibility() and actors["body"].GetVisibility()
    scene.change(hidden=HIDDEN)
    assert actors["seafloor"].GetVisibility() and not actors["base"].GetVisibility()


def test_domains_are_shown_and_hidden(scene: Scene) -> None:
    scene.change(cutoff=1.0)
    whole, tonnes = scene.shown, scene.tonnage().dry_tonnes
    scene.change(hidden_domains=frozenset({"massive"}))
    left = scene.results.blocks[scene.visible()]
    assert set(left["domain"]) == {"cap"} and 0 < scene.shown < whole
    assert scene.tonnage().dry_tonnes == tonnes
    assert "Hidden: massive; tonnes are of the whole body" in scene.plotter.actors["words"].GetText(2)
    scene.change(hidden_domains=frozenset())
    assert scene.shown == whole


def test_frames_differ_in_the_picture_and_in_words(scene: Scene) -> None:
    seen, words = {}, {}
    for frame in ("elevation", "depth", "proportional"):
        scene.change(frame=frame)
        seen[frame], words[frame] = picture_of(scene), scene.plotter.actors["foot"].GetText(0)
    assert np.abs(seen["depth"] - seen["proportional"]).max() > 50
    assert np.abs(seen["elevation"] - seen["proportional"]).max() > 50
    assert "true heights" in words["elevation"]
    assert "base laid flat" not in words["depth"] and "base laid flat" in words["proportional"]
    low, high = scene.plotter.actors["blocks"].GetBounds()[4:]
    mean = scene.view.mean_m
    assert high <= 0 and low == pytest.approx(-2.0 * mean, abs=0.2)  # exaggerated twice


@pytest.mark.parametrize("frame", ["elevation", "depth", "proportional"])
def test_axes_tell_true_coordinates(scene: Scene, frame: str) -> None:
    scene.change(frame=frame, exaggeration=4.0)
    axes = scene.plotter.renderer.cube_axes_actor
    low, high = axes.GetXAxisRange()
    places = scene.results.blocks["easting"]
    assert low <= places.min() and high >= places.max() and high - low < 300
    low, high = axes.GetZAxisRange()
    if frame == "elevation":
        assert low <= -1670 and -1650 <= high < -1620
    elif frame == "proportional":
        assert -30 <= low <= -7 and high >= 0  # a mean of 7.5 m, and a hole that goes on below the base
    else:
        assert -30 <= low <= -15 and high >= 0
    bounds = axes.GetBounds()
    assert (bounds[5] - bounds[4]) == pytest.approx(
        4.0 * (high - low)
    )  # heights are exaggerated, labels are not


def test_axes_do_not_grow_when_frames_are_changed(scene: Scene) -> None:
    def ranges() -> list[float]:
        axes = scene.plotter.renderer.cube_axes_actor
        return [*axes.GetXAxisRange(), *axes.GetZAxisRange(), *axes.GetBounds()]

    first = ranges()
    for frame in ("depth", "proportional", "elevation", "proportional", "elevation"):
        scene.change(frame=frame)
    scene.change(exaggeration=5.0)
    scene.change(exaggeration=2.0)
    assert ranges() == pytest.approx(first)


def test_every_colour_draws(scene: Scene) -> None:
    assert scene.colours == ["cu_pct", "au_gpt", "domain", "proposed_class"]
    for colour in scene.colours:
        scene.change(colour=colour)
        assert picture_of(scene).std() > 5
    assert scene.words("domain") == ["cap", "massive"]


@pytest.mark.parametrize(
    ("arguments", "match"),
    [
        ({"screenshot": "shot.txt"}, r"should end in one of \.png"),
        ({"exaggeration": 0.0}, "exaggeration must lie"),
        ({"exaggeration": float("nan")}, "exaggeration must lie"),
        ({"frame": "sideways"}, "frame must be"),
        ({"hide": ["fish"]}, "'fish', which is not one of .*cap, massive"),
        ({"size": (3, 3)}, "at least 50 x 50"),
        ({"colour": "fish", "screenshot": "a.png"}, "'fish' is not a column"),
        ({"variable": "fish"}, "there is no variable 'fish'"),
    ],
)
def test_arguments_that_make_no_sense(folder: Path, arguments: dict, match: str) -> None:
    with pytest.raises(ValueError, match=match):
        open_scene(folder, **arguments)


def test_folder_without_results(tmp_path: Path) -> None:
    with pytest.raises(ResultsError, match="the file is missing"):
        open_scene(tmp_path, screenshot=tmp_path / "a.png")


@pytest.mark.skipif(
    not sys.platform.startswith("linux"), reason="displays are named by DISPLAY on Linux only"
)
def test_no_display_is_said_with_a_way_out(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("DISPLAY", raising=False)
    monkeypatch.delenv("WAYLAND_DISPLAY", raising=False)
    with pytest.raises(ViewerUnavailable, match=r"no display for a window.*--screenshot"):
        open_scene(folder)


@pytest.mark.parametrize(
    ("probe", "reason"),
    [
        ("raise ImportError('libGL.so.1: cannot open shared object file')", "libGL.so.1"),
        ("import os; os.abort()", "code -6"),
        ("import sys; sys.exit('the picture stays empty')", "stays empty"),
        ("pass", "code 0"),
    ],
)
def test_no_opengl_is_said_with_a_way_out(
    folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, probe: str, reason: str
) -> None:
    """A library that is missing, and one that ends the process: only the child ends."""
    monkeypatch.setattr(opengl, "PROBE", probe)
    with pytest.raises(ViewerUnavailable, match=reason) as caught:
        open_scene(folder, screenshot=tmp_path / "a.png")
    assert "libgl1" in caught.value.remedy and not (tmp_path / "a.png").exists()


WINDOW = """
import sys
from sms_resource.viewer.open import build_scene
from sms_resource.viewer.opengl import drawing_with, find_drawing
from sms_resource.viewer.results import read_results
from sms_resource.viewer.scene import Settings
from sms_resource.viewer.window import add_controls, next_colour
found = read_results(sys.argv[1])
settings = Settings("cu_pct", 3.0, "cu_pct", 2.0, hidden=frozenset(("base", "body", "names")))
with drawing_with(find_drawing(window=True)):
    scene = build_scene(found, settings, off_screen=False, size=(900, 700))
    add_controls(scene)
    plotter = scene.plotter
    plotter.show(auto_close=False, interactive=False, interactive_update=True)
    widgets = getattr(plotter, "widgets", plotter)
    cutoff, height = widgets.slider_widgets[:2]
    cutoff.GetRepresentation().SetValue(5.0)
    cutoff.InvokeEvent("InteractionEvent")
    assert scene.settings.cutoff == 5.0 and "above 5 %" in plotter.actors["words"].GetText(2)
    height.GetRepresentation().SetValue(4.0)
    height.InvokeEvent("EndInteractionEvent")
    assert scene.settings.exaggeration == 4.0
    boxes = widgets.button_widgets
    assert len(boxes) == 12, len(boxes)
    def press(box):
        state = box.GetRepresentation().GetState()
        box.GetRepresentation().SetState(1 - state)
        box.InvokeEvent("StateChangedEvent")
    depth, proportional, cap = boxes[7:10]
    for number, box in enumerate(boxes):
        if box not in (depth, proportional, cap):
            press(box)
    press(depth)
    assert scene.settings.frame == "depth"
    press(proportional)
    assert scene.settings.frame == "proportional" and not depth.GetRepresentation().GetState()
    press(proportional)
    assert scene.settings.frame == "elevation"
    press(depth)
    assert scene.settings.frame == "depth" and depth.GetRepresentation().GetState()
    hidden = scene.settings.hidden
    assert hidden == {"seafloor", "blocks", "holes"}, hidden
    assert scene.settings.screened and scene.settings.section is not None
    assert scene.settings.hidden_domains == {"massive"}
    press(cap)
    assert scene.settings.hidden_domains == {"cap", "massive"} and scene.shown == 0
    press(cap)
    assert len(widgets.slider_widgets) == 4
    boxes[-1].GetRepresentation().SetState(0)
    boxes[-1].InvokeEvent("StateChangedEvent")
    assert scene.settings.section is None
    next_colour(scene)
    assert scene.settings.colour == "au_gpt"
    print("CLASS", plotter.render_window.GetClassName())
    plotter.close()
"""


def test_window_under_xvfb(folder: Path, tmp_path: Path) -> None:
    """Sliders and boxes of a real window, moved by their events."""
    xvfb = shutil.which("xvfb-run")
    if xvfb is None:
        pytest.skip("xvfb-run is not installed: the window was not tested")
    script = tmp_path / "window.py"
    script.write_text(WINDOW)
    command = [xvfb, "-a", "-s", "-screen 0 1024x768x24", sys.executable, str(script), str(folder)]
    done = subprocess.run(command, capture_output=True, text=True, timeout=300, check=False)
    if "Could not create shader object" in done.stderr:
        # Two servers that start at once may take one display number, and one window loses its context: once more.
        done = subprocess.run(command, capture_output=True, text=True, timeout=300, check=False)
    assert done.returncode == 0, done.stderr[-3000:]
    assert "CLASS vtkX" in done.stdout


@pytest.mark.skipif(
    not sys.platform.startswith("linux"), reason="displays are named by DISPLAY on Linux only"
)
def test_display_that_does_not_answer(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("DISPLAY", ":4321")
    with pytest.raises(ViewerUnavailable, match=r"does not answer|no working OpenGL"):
        open_scene(folder)
