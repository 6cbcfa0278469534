"""What the tests of pictures share: figures looked into, and all that is written on them."""

from __future__ import annotations

from itertools import combinations
from typing import Any

from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.text import Text

from symamp.show.picture import Picture


def lines_of(axes: Any) -> dict[str, Any]:
    """The lines of a panel by their label."""
    return {str(line.get_label()): line for line in axes.get_lines()}


def words_on(figure: Any) -> list[str]:
    """Every word on a figure that is to be seen."""
    found = (t for t in figure.findobj(Text) if t.get_visible())
    return [t.get_text() for t in found if t.get_text().strip()]


def legend_words(figure: Any) -> list[str]:
    return [text.get_text() for legend in figure.legends for text in legend.get_texts()]


def assert_whole(picture: Picture) -> None:
    """It can be drawn, twice alike, and nothing that is written is cut off or overlaps."""
    assert picture.svg() == picture.svg()
    assert picture.caption
    assert picture.alt
    figure = picture.figure()
    renderer = FigureCanvasAgg(figure).get_renderer()
    figure.draw_without_rendering()
    frame = figure.bbox
    boxes = []
    for text in figure.findobj(Text):
        if not text.get_visible() or not text.get_text().strip():
            continue
        box = text.get_window_extent(renderer)
        if not (text.axes is not None and text.get_clip_on()):
            assert box.x0 >= frame.x0 - 1, text.get_text()
            assert box.x1 <= frame.x1 + 1, text.get_text()
            assert box.y0 >= frame.y0 - 1, text.get_text()
            assert box.y1 <= frame.y1 + 1, text.get_text()
        boxes.append((text.get_text(), box))
    for (one, box), (other, second) in combinations(boxes, 2):
        across = min(box.x1, second.x1) - max(box.x0, second.x0)
        down = min(box.y1, second.y1) - max(box.y0, second.y0)
        assert min(across, down) <= 1.5, f"{one!r} lies over {other!r}"


def assert_same_bytes(picture: Picture) -> None:
    """The other two formats come out alike twice too."""
    assert picture.pdf() == picture.pdf()
    assert picture.png(100) == picture.png(100)
