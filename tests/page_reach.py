"""How far a figure reaches out of its page, in inches."""

from typing import Any


def reach_inches(figure: Any) -> float:
    """Give the largest distance by which something drawn lies outside of the page; negative if all is inside.

    Labels of axes are looked at one by one: older versions of matplotlib leave their length out of the figure's box.
    """
    from matplotlib.axis import Tick
    from matplotlib.text import Text

    figure.draw_without_rendering()
    ticks = {id(label) for tick in figure.findobj(Tick) for label in (tick.label1, tick.label2)}  # not all are drawn
    hidden = {id(text) for axes in figure.axes if not axes.get_visible() for text in axes.findobj(Text)}
    texts = [
        text
        for text in figure.findobj(Text)
        if text.get_text() and text.get_visible() and id(text) not in ticks | hidden
    ]
    boxes = [text.get_window_extent().transformed(figure.dpi_scale_trans.inverted()) for text in texts]
    width, height = figure.get_size_inches()
    return float(
        max(max(-box.x0, -box.y0, box.x1 - width, box.y1 - height) for box in (figure.get_tightbbox(), *boxes))
    )
