"""What a figure works out again and again while it is placed and written, worked out once.

To place a figure and to write it as two files, matplotlib sets each text some eight times and each axis asks for its
ticks some ten times, though nothing about them changes any more. Inside ``settled`` the answers are kept, each under all
that it still depends on. The files are the same, byte for byte; a test holds that.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from functools import partial
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from matplotlib.figure import Figure


@contextmanager
def settled(figure: Figure) -> Iterator[None]:
    """Place and write ``figure`` inside this; its artists must not be changed meanwhile.

    A matplotlib that has no such inner methods is left as it is, and is only slower.
    """
    from matplotlib.axis import Axis
    from matplotlib.text import Text

    with ExitStack() as kept:
        axes: list[Any] = [axis for place in figure.axes for axis in (place.xaxis, place.yaxis)]
        if hasattr(Axis, "_update_ticks") and hasattr(Axis, "_get_ticklabel_bboxes"):
            for axis in axes:
                _keep(kept, axis, "_update_ticks", partial(_ticks_key, axis))
                _keep(kept, axis, "_get_ticklabel_bboxes", partial(_place_key, axis))
                axis._update_ticks()  # makes the ticks, so that their texts are found below
        if hasattr(Text, "_get_layout"):
            for text in _texts(figure, axes):
                _keep(kept, text, "_get_layout", partial(_text_key, text))
        yield


def _texts(figure: Any, axes: list[Any]) -> Iterator[Any]:
    """Every text that is shown, once."""
    for axis in axes:
        yield from (axis.label, axis.offsetText)
        for tick in (*axis.majorTicks, *axis.minorTicks):
            yield from (label for label in (tick.label1, tick.label2) if label.get_visible())
    for place in figure.axes:
        yield from (place.title, place._left_title, place._right_title, *place.texts)
    yield from figure.texts
    for legend in (*figure.legends, *(place.legend_ for place in figure.axes if place.legend_)):
        yield from (*legend.get_texts(), legend.get_title())


def _text_key(text: Any, renderer: Any) -> tuple[Any, ...]:
    return text.get_text(), text.get_figure(root=True).dpi, type(renderer)


def _ticks_key(axis: Any) -> tuple[Any, ...]:
    # Automatic ticks look at the room on the paper, which is the same for every file up to rounding.
    box, dpi = axis.axes.bbox, axis.get_figure(root=True).dpi
    low, high = axis.get_view_interval()
    return float(low), float(high), round(box.width / dpi, 5), round(box.height / dpi, 5)


def _place_key(axis: Any, ticks: Any, renderer: Any) -> tuple[Any, ...]:
    low, high = axis.get_view_interval()
    return float(low), float(high), *axis.axes.bbox.bounds, axis.get_figure(root=True).dpi, type(renderer)


def _keep(kept: ExitStack, item: Any, name: str, key: Callable[..., tuple[Any, ...]]) -> None:
    """Let ``item`` remember what its method ``name`` answered, until ``kept`` closes."""
    asked = getattr(item, name)
    answers: dict[tuple[Any, ...], Any] = {}

    def answer(*given: Any) -> Any:
        at = key(*given)
        if at not in answers:
            answers[at] = asked(*given)
        return answers[at]

    setattr(item, name, answer)
    kept.callback(delattr, item, name)
