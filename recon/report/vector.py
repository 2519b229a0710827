"""Matplotlib figures as SVG inside the page: its fonts, and its colours in light and in dark."""

from __future__ import annotations

import io
import re
from collections.abc import Callable
from html import escape
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from matplotlib.figure import Figure

INK = "#22262a"
"""Text and axes."""

FAINT = "#c9ced3"
"""Grid lines."""

LIMIT = "#b3261e"
"""Limits, and what is beyond them."""

SERIES = ("#0b66a8", "#c65a00", "#0a8068", "#9b4a8c", "#6b6f73", "#86700a")
"""Lines of curves; they differ in lightness too, and each line has a marker of its own."""

THEME = {INK: "--ink", FAINT: "--faint", LIMIT: "--limit"} | {
    colour: f"--series-{number}" for number, colour in enumerate(SERIES, 1)
}
"""The custom property of the style sheet that takes the place of each colour in the page."""


def inline_svg(build: Callable[[], Figure], name: str, description: str) -> str:
    """Build a figure and return it as an SVG element whose colours follow the page.

    Equal figures give equal text.

    Parameters
    ----------
    build : callable
        Makes the figure; called with Matplotlib's own settings, whatever the user's are.
    name : str
        Unique in the page.
    description : str
        What is seen, for those who do not see it.

    Examples
    --------
    >>> from matplotlib.figure import Figure
    >>> print(inline_svg(lambda: Figure(figsize=(1, 1)), "empty", "nothing < something")[:70])
    <svg role="img" aria-label="nothing &lt; something" viewBox="0 0 72 72
    """
    import matplotlib

    own: Any = {name: value for name, value in matplotlib.rcParamsDefault.items() if "backend" not in name}
    text = io.StringIO()
    # rcParams are the only way to tell the SVG writer that text stays text and how ids are made
    with matplotlib.rc_context(own | {"svg.fonttype": "none", "svg.hashsalt": name}):
        metadata = dict.fromkeys(("Creator", "Date", "Format", "Type"))
        build().savefig(text, format="svg", transparent=True, metadata=metadata)
    svg = text.getvalue()
    view_box = re.search(r'viewBox="([^"]*)"', svg)
    assert view_box is not None
    content = svg[svg.index(">", svg.index("<svg")) + 1 :]
    content = re.sub(r"<metadata>.*?</metadata>\s*", "", content, flags=re.DOTALL)
    # Matplotlib numbers its groups; those of two figures in one page would have the same id
    content = re.sub(r'<g id="[^"]*"', "<g", content)
    for colour, custom_property in THEME.items():
        content = content.replace(colour, f"var({custom_property})")
    return f'<svg role="img" aria-label="{escape(description)}" viewBox="{view_box[1]}">{content}'.strip()
