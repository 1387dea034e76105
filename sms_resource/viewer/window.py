"""Sliders and boxes of the window."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from sms_resource.units import element_label
from sms_resource.viewer.scene import INK, Scene

ON, OFF = "#0072b2", "#d9dde1"
STEP, BOX = 30, 18
MOST_DOMAINS = 6
LAYER_BOXES = (("seafloor", "Seafloor"), ("blocks", "Blocks"), ("holes", "Holes"), ("names", "Hole names"),
               ("body", "Body, solid"), ("base", "Base surface"))  # fmt: skip


def add_controls(scene: Scene) -> None:
    """Add sliders (cut-off, exaggeration, section) and boxes (layers, screens, vertical frames, domains, section)."""
    plotter = scene.plotter
    low, high = scene.limits
    _slider(scene, lambda value: scene.change(cutoff=float(value)), (low, high), scene.settings.cutoff,
            f"Cut-off {element_label(scene.settings.variable)}", (0.64, 0.90), "always")  # fmt: skip
    _slider(scene, lambda value: scene.change(exaggeration=round(float(value), 1)), (1.0, 5.0),
            min(max(scene.settings.exaggeration, 1.0), 5.0), "Vertical exaggeration", (0.36, 0.58), "end")  # fmt: skip
    scene.plotter.camera.SetWindowCenter(0.0, -0.16)  # room for the sliders
    scene.plotter.camera.zoom(0.92)
    row = 0
    for layer, text in LAYER_BOXES:
        _box(scene, row, text, layer not in scene.settings.hidden, _layer_switch(scene, layer))
        row += 1
    if scene.has_screens:
        _box(
            scene,
            row,
            "Leave out what screens took",
            scene.settings.screened,
            lambda on: scene.change(screened=bool(on)),
        )
        row += 1
    row = _FrameSwitch(scene).add(row)
    domains = scene.domains if 1 < len(scene.domains) <= MOST_DOMAINS else []
    for domain in domains:
        on = domain not in scene.settings.hidden_domains
        _box(scene, row, f"Domain {domain}", on, _domain_switch(scene, domain))
        row += 1
    section = _SectionSwitch(scene)
    _box(scene, row, "Section", scene.settings.section is not None, section.switch)
    plotter.add_key_event("c", lambda: next_colour(scene))
    plotter.add_text("c: next colour   r: whole view   q: close", position=(0.80, 0.965), viewport=True, font_size=7,
                     color=INK, name="keys")  # fmt: skip


def next_colour(scene: Scene) -> None:
    """Colour the blocks by the next column in turn."""
    names = scene.colours
    now = names.index(scene.settings.colour) if scene.settings.colour in names else -1
    scene.change(colour=names[(now + 1) % len(names)])
    scene.plotter.render()


def _domain_switch(scene: Scene, domain: str) -> Callable[[bool], None]:
    def switch(on: bool) -> None:
        hidden = set(scene.settings.hidden_domains)
        hidden.discard(domain) if on else hidden.add(domain)
        scene.change(hidden_domains=frozenset(hidden))

    return switch


def _layer_switch(scene: Scene, layer: str) -> Callable[[bool], None]:
    def switch(on: bool) -> None:
        hidden = set(scene.settings.hidden)
        hidden.discard(layer) if on else hidden.add(layer)
        scene.change(hidden=frozenset(hidden))

    return switch


class _FrameSwitch:
    """Boxes for the vertical frames; one at most is on, and without any heights are true."""

    def __init__(self, scene: Scene) -> None:
        self._scene = scene
        self._boxes: dict[str, Any] = {}

    def add(self, row: int) -> int:
        """Add a box for each frame that the results allow; the next free row."""
        frames = [("depth", "Seafloor laid flat", self._scene.has_depth),
                  ("proportional", "Seafloor and base laid flat", self._scene.has_proportion)]  # fmt: skip
        for frame, text, possible in frames:
            if possible:
                on = self._scene.settings.frame == frame
                self._boxes[frame] = _box(self._scene, row, text, on, self._switch(frame))
                row += 1
        return row

    def _switch(self, frame: str) -> Callable[[bool], None]:
        def switch(on: bool) -> None:
            for other, widget in self._boxes.items():
                if other != frame:
                    widget.GetRepresentation().SetState(0)
            self._scene.change(frame=frame if on else "elevation")

        return switch


class _SectionSwitch:
    """A box for the section, and two sliders that come with it."""

    def __init__(self, scene: Scene) -> None:
        self._scene = scene
        self._azimuth, self._offset = scene.settings.section or (90.0, 0.0)
        self._widgets: list[Any] = []
        if scene.settings.section is not None:
            self._show()

    def switch(self, on: bool) -> None:
        """Turn the section on or off."""
        if bool(on) == bool(self._widgets):
            return
        if on:
            self._show()
            self._apply()
            return
        for widget in self._widgets:
            widget.Off()
        self._widgets = []
        self._scene.change(section=None)

    def _show(self) -> None:
        blocks = self._scene.results.blocks
        reach = 0.6 * max(float(blocks[name].max() - blocks[name].min()) for name in ("easting", "northing"))
        self._widgets = [
            _slider(self._scene, self._turn, (0.0, 180.0), self._azimuth % 180.0, "Section azimuth (degrees)",
                    (0.64, 0.90), "end", height=0.18),
            _slider(self._scene, self._move, (-reach, reach), self._offset, "Section offset (m)", (0.36, 0.58), "end",
                    height=0.18),
        ]  # fmt: skip

    def _turn(self, value: float) -> None:
        self._azimuth = float(value)
        self._apply()

    def _move(self, value: float) -> None:
        self._offset = float(value)
        self._apply()

    def _apply(self) -> None:
        if self._scene.settings.section != (self._azimuth, self._offset):
            self._scene.change(section=(self._azimuth, self._offset))


def _slider(
    scene: Scene, act: Callable[[float], None], limits: tuple[float, float], value: float, title: str,
    span: tuple[float, float], event: str, height: float = 0.085,
) -> Any:  # fmt: skip
    widget = scene.plotter.add_slider_widget(
        act, limits, value=min(max(value, limits[0]), limits[1]), title=title, pointa=(span[0], height),
        pointb=(span[1], height), color=INK, interaction_event=event, fmt="%.2f", title_height=0.016,
        slider_width=0.016, tube_width=0.003,
    )  # fmt: skip
    look = widget.GetSliderRepresentation()
    look.SetSliderLength(0.012)
    look.SetEndCapLength(0.004)
    look.SetEndCapWidth(0.012)
    look.SetLabelHeight(0.016)
    for words in (look.GetTitleProperty(), look.GetLabelProperty()):
        words.BoldOff()
        words.ShadowOff()
    return widget


def _box(scene: Scene, row: int, text: str, on: bool, act: Callable[[bool], None]) -> Any:
    x, y = 14.0, 60.0 + STEP * row
    widget = scene.plotter.add_checkbox_button_widget(
        act,
        value=on,
        position=(x, y),
        size=BOX,
        border_size=2,
        color_on=ON,
        color_off=OFF,
        background_color=INK,
    )
    scene.plotter.add_text(
        text, position=(x + BOX + 8, y), font_size=8, color=INK, name=f"box-{row}", render=False
    )
    return widget
