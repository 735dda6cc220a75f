"""Figures as inline SVG: same bytes for the same input, no ids shared between two pictures of one page."""

from __future__ import annotations

import io
import re
import textwrap
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from xml.etree import ElementTree

import matplotlib
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties
from matplotlib.textpath import text_to_path

ACCENT = "#0b5c8a"
INK = "#20262c"
QUIET = "#6b747d"
RULE = "#d5dade"
SVG = "http://www.w3.org/2000/svg"
XLINK = "http://www.w3.org/1999/xlink"

_STYLE = {
    "svg.hashsalt": "mtest",
    "svg.fonttype": "none",  # text stays text: it can be read out, searched, and takes the page's type
    "font.family": ["DejaVu Sans"],  # comes with matplotlib, so layouts do not depend on the machine
    "font.size": 8.5,
    "text.color": INK,
    "axes.edgecolor": QUIET,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.6,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.unicode_minus": True,
    "xtick.color": QUIET,
    "ytick.color": QUIET,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.major.size": 3,
    "ytick.major.size": 3,
    "text.parse_math": False,  # a dollar sign in an endpoint's name is a dollar sign
}
_ID = re.compile(r"url\(#([^)]+)\)")


@dataclass(frozen=True, slots=True, kw_only=True)
class Picture:
    """A figure ready for the page.

    svg : the element, carrying role and label
    caption : what stands below it
    width : the width in CSS pixels at which its type has the size meant
    """

    svg: str
    caption: str
    width: int


@contextmanager
def canvas(*, width: float, height: float) -> Iterator[Figure]:
    """Yield a figure of so many inches, with the report's type and lines, touching no global state afterwards."""
    with matplotlib.rc_context(_STYLE):
        yield Figure(figsize=(width, height), layout="constrained")


def to_picture(figure: Figure, *, key: str, label: str, caption: str) -> Picture:
    """Return a figure as inline SVG. Call it inside `canvas`.

    Parameters
    ----------
    key : unique within the page; put before every id
    label : what the figure shows, for those who cannot see it
    """
    buffer = io.StringIO()
    figure.savefig(
        buffer, format="svg", transparent=True, metadata={"Date": None, "Creator": None, "Format": None, "Type": None}
    )
    ElementTree.register_namespace("", SVG)
    ElementTree.register_namespace("xlink", XLINK)
    root = ElementTree.fromstring(buffer.getvalue().encode())
    _strip(root)
    _own_ids(root, key)
    width = round(figure.get_figwidth() * 96)
    root.attrib.pop("height", None)
    root.set("width", "100%")
    root.set("role", "img")
    root.set("aria-label", label)
    return Picture(svg=ElementTree.tostring(root, encoding="unicode"), caption=caption, width=width)


def text_width(text: str) -> float:
    """Return how many inches the longest line of a text takes. Call it inside `canvas`."""
    font, measure = FontProperties(), text_to_path.get_text_width_height_descent
    return max(measure(line, font, ismath=False)[0] for line in text.split("\n")) / 72


def wrap_text(text: str, *, room: float) -> str:
    """Return a text in as many lines as keep it within so many inches. Call it inside `canvas`."""
    letters = len(text)
    while text_width(wrapped := textwrap.fill(text, letters)) > room and letters > 8:
        letters -= 1
    return wrapped


def quiet_axis(axes: Axes) -> None:
    """Take away what carries no number: the left spine and the ticks of a row axis."""
    axes.spines["left"].set_visible(False)
    axes.tick_params(axis="y", length=0)


def _strip(root: ElementTree.Element) -> None:
    """Take out metadata and the style sheet, which inside a page would speak for the whole page."""
    for parent in list(root.iter()):
        for child in list(parent):
            if child.tag in (f"{{{SVG}}}metadata", f"{{{SVG}}}style"):
                parent.remove(child)


def _own_ids(root: ElementTree.Element, key: str) -> None:
    """Drop ids nothing refers to, and put the picture's key before the others."""
    used = set()
    for element in root.iter():
        for name, value in element.attrib.items():
            used.update(_ID.findall(value))
            if name == f"{{{XLINK}}}href" and value.startswith("#"):
                used.add(value[1:])
    for element in root.iter():
        identity = element.attrib.pop("id", None)
        if identity in used:
            element.set("id", f"{key}-{identity}")
        for name, value in list(element.attrib.items()):
            if name == f"{{{XLINK}}}href" and value.startswith("#"):
                # plain href: the xlink form is no longer needed by any browser
                del element.attrib[name]
                element.set("href", f"#{key}-{value[1:]}")
            elif "url(#" in value:
                element.set(name, _ID.sub(rf"url(#{key}-\1)", value))
