"""Whether this machine can draw, found out in a process of its own.

A missing or broken OpenGL library can end the whole process without an exception, so the first picture is
drawn by a child.
"""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager

from sms_resource.viewer.errors import ViewerUnavailable

# Draws a cone of 16 x 16 pixels and prints the class of the window, or fails.
PROBE = """
import sys
import vtkmodules.vtkRenderingOpenGL2
import vtkmodules.vtkInteractionStyle
from vtkmodules.vtkFiltersSources import vtkConeSource
from vtkmodules.vtkRenderingCore import vtkActor, vtkPolyDataMapper, vtkRenderer, vtkRenderWindow, vtkWindowToImageFilter
window = vtkRenderWindow()
window.SetOffScreenRendering(1)
window.SetSize(16, 16)
source, mapper, actor, renderer = vtkConeSource(), vtkPolyDataMapper(), vtkActor(), vtkRenderer()
mapper.SetInputConnection(source.GetOutputPort())
actor.SetMapper(mapper)
renderer.AddActor(actor)
window.AddRenderer(renderer)
window.Render()
image = vtkWindowToImageFilter()
image.SetInput(window)
image.Update()
low, high = image.GetOutput().GetScalarRange()
if high <= low:
    sys.exit("the picture stays empty")
print("WINDOW", window.GetClassName())
"""
NO_WINDOW = ("vtkEGLRenderWindow", "vtkOSOpenGLRenderWindow")
LIBRARY = "Install an OpenGL library: on Debian or Ubuntu 'apt-get install libgl1 libegl1' or 'libosmesa6'."
SCREENSHOT = "Use --screenshot FILE to draw into a picture instead, or start it on a desktop."


def find_drawing(*, window: bool, seconds: float = 120.0) -> str:
    """Name of VTK's class of window that works here.

    Parameters
    ----------
    window : bool
        Whether a window on a display is wanted, or only a picture.
    seconds : float
        How long the child may take.

    Raises
    ------
    ViewerUnavailable
        If there is no display for a window, or no OpenGL library at all.
    """
    if window and sys.platform.startswith("linux"):
        if not (os.environ.get("DISPLAY") or os.environ.get("WAYLAND_DISPLAY")):
            raise ViewerUnavailable("there is no display for a window", SCREENSHOT)
    try:
        child = subprocess.run(
            [sys.executable, "-c", PROBE], capture_output=True, text=True, timeout=seconds, check=False
        )
    except (OSError, subprocess.TimeoutExpired) as error:
        raise ViewerUnavailable(f"the trial picture did not come ({error})", LIBRARY) from error
    found = [line.split()[1] for line in child.stdout.splitlines() if line.startswith("WINDOW ")]
    if child.returncode != 0 or not found:
        lines = [line for line in child.stderr.strip().splitlines() if line.strip()]
        reason = lines[-1].strip() if lines else f"it ended with code {child.returncode}"
        raise ViewerUnavailable(f"no working OpenGL library was found ({reason[:160]})", LIBRARY)
    if window and found[0] in NO_WINDOW:
        raise ViewerUnavailable(f"the display {os.environ.get('DISPLAY', '')!r} does not answer", SCREENSHOT)
    return found[0]


@contextmanager
def drawing_with(name: str) -> Iterator[None]:
    """Let VTK take this class of window at once, without trying (and complaining about) others."""
    key = "VTK_DEFAULT_OPENGL_WINDOW"
    before = os.environ.get(key)
    os.environ[key] = name
    try:
        yield
    finally:
        if before is None:
            del os.environ[key]
        else:
            os.environ[key] = before
