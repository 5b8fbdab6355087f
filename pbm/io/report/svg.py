"""matplotlib figures as inline SVG on one page: no identifier shared, no font or address of their own, the same bytes each time.

What the page already knows (namespaces, fonts, document type) is taken out, and so are groups that only nest; styles become classes shared
by all figures; identifiers stay only where something refers to them; coordinates keep a tenth of a point. Figures are drawn inside
their axes' limits, so they need no clipping.
"""

import io
import re
from collections.abc import Iterator
from typing import Any
from xml.etree import ElementTree

from markupsafe import Markup
from matplotlib.figure import Figure

# Keys are matplotlib's own names; its newer type hints list them one by one, its older ones do not.
LOOK: dict[Any, Any] = {
    "svg.fonttype": "none",
    "svg.hashsalt": "pbm",
    "text.parse_math": False,
    "font.family": "DejaVu Sans",
    "font.size": 8.5,
    "axes.labelsize": 8.5,
    "xtick.labelsize": 8,
    "ytick.labelsize": 8,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.edgecolor": "#5b5b5b",
    "axes.labelcolor": "#1d1d1b",
    "xtick.color": "#5b5b5b",
    "ytick.color": "#5b5b5b",
    "xtick.labelcolor": "#1d1d1b",
    "ytick.labelcolor": "#1d1d1b",
    "axes.linewidth": 0.7,
    "xtick.major.size": 0,  # the grid tells where a number belongs
    "ytick.major.size": 0,
    "xtick.major.pad": 6,
    "ytick.major.pad": 5,
    "xtick.minor.size": 0,
    "ytick.minor.size": 0,
    "axes.grid": True,
    "axes.axisbelow": True,
    "grid.color": "#dcdad2",
    "grid.linewidth": 0.5,
    "lines.linewidth": 1.4,
    "lines.markersize": 4.2,
    "figure.facecolor": "none",
    "axes.facecolor": "none",
}
_NO_STAMP = {"Date": None, "Creator": None, "Format": None, "Type": None}
_LONG = re.compile(r"-?\d+\.\d{2,}(?:e-?\d+)?")
_GEOMETRY = ("d", "x", "y", "transform")
_FAMILY = re.compile(r"font-family: [^;]*;? ?")
_NO_TURN = re.compile(r"^rotate\(-?0[ )]")
_LEFT_OUT = ("metadata", "style", "clipPath")


class Album:
    """The figures of one page: each gets a number that keeps its identifiers apart, and all share their styles.

    Attributes
    ----------
    figures
        How many there are.
    """

    def __init__(self) -> None:
        self.figures = 0
        self._classes: dict[str, str] = {}

    def inline(self, figure: Figure, seen: str) -> Markup:
        """The figure as an `<svg>` element.

        Parameters
        ----------
        figure
            Drawn under `LOOK`.
        seen
            What a reader who cannot see the figure is told.
        """
        written = io.StringIO()
        figure.savefig(written, format="svg", metadata=_NO_STAMP)
        self.figures += 1
        root = ElementTree.fromstring(written.getvalue())
        shown = ElementTree.Element(
            "svg", {"class": "plot", "viewBox": root.attrib["viewBox"], "role": "img", "aria-label": seen}
        )
        shown.extend(self._lightened(root))
        _name_apart(shown, f"plot{self.figures}")
        return Markup(ElementTree.tostring(shown, encoding="unicode"))

    def styles(self) -> Markup:
        """The style sheet of all figures so far."""
        return Markup("\n".join(f".{name} {{ {style} }}" for style, name in self._classes.items()))

    def _lightened(self, parent: ElementTree.Element) -> Iterator[ElementTree.Element]:
        """The children of an element without what the page supplies and digits nobody sees."""
        for child in parent:
            name = child.tag.rpartition("}")[2]
            inside = list(self._lightened(child))
            if name == "g" or (name == "defs" and not inside):
                yield from inside
            elif name not in _LEFT_OUT and not _invisible(child):
                kept = ElementTree.Element(name, self._attributes(child))
                kept.text = child.text if name == "text" else None
                kept.extend(inside)
                yield kept

    def _attributes(self, element: ElementTree.Element) -> dict[str, str]:
        kept = {name: _shortened(element.attrib[name]) for name in _GEOMETRY if name in element.attrib}
        if _NO_TURN.match(kept.get("transform", "")):
            del kept["transform"]
        for name, value in element.attrib.items():
            if name == "id" or name.endswith("}href"):
                kept[name.rpartition("}")[2]] = value
        if style := _FAMILY.sub("", element.attrib.get("style", "")):
            kept["class"] = self._classes.setdefault(style, f"s{len(self._classes) + 1}")
        return kept


def _invisible(element: ElementTree.Element) -> bool:
    """The empty backgrounds of figure and axes."""
    return element.attrib.get("style") == "fill: none"


def _shortened(geometry: str) -> str:
    """Rounded to a tenth; a path of straight lines without the letter that a reader of paths takes as said."""
    short = " ".join(_LONG.sub(lambda found: f"{float(found[0]):.1f}".removesuffix(".0"), geometry).split())
    return short if "C" in short or "Q" in short else short.replace(" L ", " ")


def _name_apart(root: ElementTree.Element, prefix: str) -> None:
    """Give what is referred to a short identifier of this figure's own."""
    used = [element for element in root.iter() if "href" in element.attrib]
    names = {
        name: f"{prefix}-{place}" for place, name in enumerate(dict.fromkeys(one.attrib["href"][1:] for one in used), 1)
    }
    for element in used:
        element.set("href", f"#{names[element.attrib['href'][1:]]}")
    for element in root.iter():
        identifier = element.attrib.pop("id", None)
        if identifier in names:
            element.set("id", names[identifier])
