"""Open a folder of results as a scene: in a window, or into a picture."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from sms_resource.viewer.opengl import drawing_with, find_drawing
from sms_resource.viewer.results import read_results

if TYPE_CHECKING:
    from sms_resource.viewer.scene import Scene

FRAMES = ("elevation", "depth", "proportional")
PICTURES = (".png", ".jpg", ".jpeg", ".tif", ".tiff", ".bmp")


def open_scene(
    folder: str | Path,
    *,
    screenshot: str | Path | None = None,
    variable: str | None = None,
    cutoff: float | None = None,
    exaggeration: float = 1.0,
    section: float | tuple[float, float] | None = None,
    colour: str | None = None,
    frame: str = "elevation",
    screened: bool = True,
    hide: Sequence[str] = ("base", "body", "names"),
    size: tuple[int, int] = (1400, 900),
) -> Path | None:
    """Show the results of a run.

    Reads nothing but the folder of results.

    Parameters
    ----------
    folder : path
        As a run leaves it.
    screenshot : path, optional
        Draw into this picture (.png, .jpg, .tif, .bmp) instead of a window; no display is needed.
    variable : str, optional
        Column of the cut-off, such as "cu_pct" or "cu"; None takes the study's.
    cutoff : float, optional
        Blocks at or above it show; None takes the study's.
    exaggeration : float
        Factor on heights, more than 0.
    section : float or (float, float), optional
        Azimuth in degrees, and offset in m, of a vertical plane that opens the blocks.
    colour : str, optional
        Column that colours the blocks; None takes ``variable``.
    frame : "elevation" | "depth" | "proportional"
        True heights, the seafloor laid flat, or seafloor and base laid flat, whatever frame the estimate was made in.
    screened : bool
        Whether to leave out what the screens took, as the study's table does.
    hide : sequence of str
        Of "seafloor", "base", "body", "blocks", "holes", "names", or domains of the blocks; a window can show them
        again.
    size : (int, int)
        Pixels.

    Returns
    -------
    Path or None
        The picture, where one was asked for.

    Raises
    ------
    ResultsError
        If a file of the results is missing or broken, or a column is not there.
    ValueError
        If an argument makes no sense.
    ViewerUnavailable
        If the machine has no display for a window, or no OpenGL library at all.
    """
    from sms_resource.viewer.scene import LAYERS, Settings

    picture = None if screenshot is None else Path(screenshot)
    _check_arguments(picture, exaggeration, frame, size)
    results = read_results(folder, variable=variable, cutoff=cutoff)
    domains = set(results.blocks["domain"].astype(str)) if "domain" in results.blocks else set()
    unknown = [name for name in hide if name not in LAYERS and name not in domains]
    if unknown:
        known = ", ".join([*LAYERS, *sorted(domains)])
        raise ValueError(f"hide names {unknown[0]!r}, which is not one of {known}")
    settings = Settings(
        variable=results.variable, cutoff=results.cutoff, colour=colour or results.variable,
        exaggeration=float(exaggeration), frame=frame, screened=screened, section=_section(section),
        hidden=frozenset(name for name in hide if name in LAYERS),
        hidden_domains=frozenset(name for name in hide if name not in LAYERS),
    )  # fmt: skip
    if settings.colour not in results.blocks:
        raise ValueError(f"colour {settings.colour!r} is not a column of the block model")
    with drawing_with(find_drawing(window=picture is None)):
        scene = build_scene(results, settings, off_screen=picture is not None, size=size)
        if picture is not None:
            try:
                picture.parent.mkdir(parents=True, exist_ok=True)
                scene.plotter.screenshot(str(picture))
            finally:
                scene.plotter.close()
            return picture
        from sms_resource.viewer.window import add_controls

        add_controls(scene)
        scene.plotter.show(title=f"{results.title}: {Path(folder).name}")
        return None


def build_scene(results: Any, settings: Any, *, off_screen: bool, size: tuple[int, int]) -> Scene:
    """A plotter with the whole scene in it, not yet shown."""
    import pyvista as pv

    from sms_resource.viewer.scene import PAPER, Scene

    plotter: Any = pv.Plotter(off_screen=off_screen, window_size=list(size), lighting="light kit")
    plotter.set_background(PAPER)
    plotter.enable_anti_aliasing("ssaa" if off_screen else "fxaa")
    plotter.enable_depth_peeling(6)
    scene = Scene(results, settings, plotter)
    scene.draw()
    scene.look()
    return scene


def _section(section: float | tuple[float, float] | None) -> tuple[float, float] | None:
    if section is None:
        return None
    if isinstance(section, (int, float)):
        return float(section), 0.0
    azimuth, offset = section
    return float(azimuth), float(offset)


def _check_arguments(picture: Path | None, exaggeration: float, frame: str, size: tuple[int, int]) -> None:
    if picture is not None and picture.suffix.lower() not in PICTURES:
        raise ValueError(f"screenshot {picture.name!r} should end in one of {', '.join(PICTURES)}")
    if not 0 < exaggeration <= 100:
        raise ValueError(f"exaggeration must lie between 0 and 100, not {exaggeration!r}")
    if frame not in FRAMES:
        raise ValueError(f"frame must be one of {', '.join(FRAMES)}, not {frame!r}")
    if min(size) < 50:
        raise ValueError(f"size must be at least 50 x 50 pixels, not {size!r}")
