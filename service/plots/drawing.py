"""A drawing in SVG: shapes by class, looks left to the stylesheet, words for those who listen."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Mapping, Sequence
from typing import Final, Literal

from markupsafe import Markup, escape

from service.plots.scales import Point

Anchor = Literal["start", "middle", "end"]

#: A line may be drawn this far from its points: far less than its own width.
_HAIR_PX: Final = 0.1
_SVG_NAMESPACE: Final = "http://www.w3.org/2000/svg"


class Drawing:
    """Collects shapes; every text is escaped.

    Parameters
    ----------
    name : str
        Unique in the page; the ids of title and description are made from it.
    width, height : float
        Size in the drawing's own units, which are CSS pixels at full size.
    """

    def __init__(self, name: str, width: float, height: float, css_class: str) -> None:
        self._name = name
        self._size = (width, height)
        self._class = css_class
        self._shapes: list[Markup] = []
        self._data: dict[str, str] = {}

    def tell(self, **data: str) -> None:
        """Note for scripts how places on paper become values, as ``data-`` attributes."""
        self._data |= data

    def tip(self, words: str) -> None:
        """Have the shape drawn last tell these words where a pointer rests on it."""
        opening, mark, _ = self._shapes[-1].rpartition("/>")
        if not mark:
            raise ValueError("only a bare shape takes a tip")
        tag = opening[1:].partition(" ")[0]
        self._shapes[-1] = Markup("{}><title>{}</title></{}>").format(Markup(opening), words, tag)  # noqa: S704  # made here, escaped there

    def line(self, start: Point, end: Point, css_class: str) -> None:
        """Draw a straight line."""
        self._shapes.append(
            Markup('<line class="{}" x1="{}" y1="{}" x2="{}" y2="{}"/>').format(
                css_class, _px(start[0]), _px(start[1]), _px(end[0]), _px(end[1])
            )
        )

    def box(self, corner: Point, opposite: Point, css_class: str) -> None:
        """Draw a rectangle between two corners."""
        left, right = sorted((corner[0], opposite[0]))
        top, bottom = sorted((corner[1], opposite[1]))
        self._shapes.append(
            Markup('<rect class="{}" x="{}" y="{}" width="{}" height="{}"/>').format(
                css_class, _px(left), _px(top), _px(right - left), _px(bottom - top)
            )
        )

    def curve(self, runs: Iterable[Sequence[Point]], css_class: str) -> None:
        """Draw a line through points, in one or more runs."""
        path = "".join(
            "M" + "L".join(f"{_px(x)} {_px(y)}" for x, y in _visible(run)) for run in runs
        )
        if path:
            self._shapes.append(Markup('<path class="{}" d="{}"/>').format(css_class, path))

    def dot(self, centre: Point, radius: float, css_class: str) -> None:
        """Draw a circle."""
        self._shapes.append(
            Markup('<circle class="{}" cx="{}" cy="{}" r="{}"/>').format(
                css_class, _px(centre[0]), _px(centre[1]), _px(radius)
            )
        )

    def diamond(self, centre: Point, radius: float, css_class: str) -> None:
        """Draw a square on its corner."""
        x, y = centre
        corners = ((x, y - radius), (x + radius, y), (x, y + radius), (x - radius, y))
        points = " ".join(f"{_px(a)},{_px(b)}" for a, b in corners)
        self._shapes.append(Markup('<polygon class="{}" points="{}"/>').format(css_class, points))

    def arc(self, start: Point, end: Point, radius: float, css_class: str, *, left: bool) -> None:
        """Draw the shorter arc of a circle between two points, bending left or right on the way."""
        self._shapes.append(
            Markup('<path class="{}" d="M{} {}A{} {} 0 0 {} {} {}"/>').format(
                css_class,
                _px(start[0]),
                _px(start[1]),
                _px(radius),
                _px(radius),
                int(not left),
                _px(end[0]),
                _px(end[1]),
            )
        )

    def text(self, place: Point, words: str, css_class: str, anchor: Anchor = "middle") -> None:
        """Write a few words."""
        self._shapes.append(
            Markup('<text class="{}" x="{}" y="{}" text-anchor="{}">{}</text>').format(
                css_class, _px(place[0]), _px(place[1]), anchor, words
            )
        )

    def document(self, title: str, description: str, style: str) -> str:
        """The finished drawing as a file of its own, which carries its looks with it."""
        inline = str(self.markup(title, description))
        opening, rest = inline.split(">", 1)
        size = f' width="{_px(self._size[0])}" height="{_px(self._size[1])}"'
        return f'{opening} xmlns="{_SVG_NAMESPACE}"{size}><style>{style}</style>{rest}\n'

    def image(self, title: str, description: str, looks: Mapping[str, str]) -> str:
        """The finished drawing as a file whose shapes carry their looks as attributes.

        A page may hold it as an image or take it in, under a policy that allows no style of
        its own; there a stylesheet goes before the attributes.

        Parameters
        ----------
        title, description : str
        looks : mapping
            Presentation attributes by class; of several classes the last word counts.
        """

        def dressed(found: re.Match[str]) -> str:
            worn: dict[str, str] = {}
            for name in found[1].split():
                worn |= dict(re.findall(r'([a-z-]+)="([^"]*)"', looks.get(name, "")))
            added = "".join(f' {name}="{value}"' for name, value in worn.items())
            return f'class="{found[1]}"{added}'

        opening, rest = str(self.markup(title, description)).split(">", 1)
        size = f' width="{_px(self._size[0])}" height="{_px(self._size[1])}"'
        shapes = re.sub(r'class="([^"]*)"', dressed, rest)
        return f'{opening} xmlns="{_SVG_NAMESPACE}"{size} {looks["svg"]}>{shapes}\n'

    def markup(self, title: str, description: str) -> Markup:
        """The finished drawing, with its title and description."""
        head = Markup(
            '<svg class="plot {}" viewBox="0 0 {} {}" role="img" '
            'aria-labelledby="{}-title {}-desc"><title id="{}-title">{}</title>'
            '<desc id="{}-desc">{}</desc>'
        ).format(
            self._class,
            _px(self._size[0]),
            _px(self._size[1]),
            self._name,
            self._name,
            self._name,
            escape(title),
            self._name,
            escape(description),
        )
        if self._data:
            noted = Markup("").join(
                Markup(' data-{}="{}"').format(name.replace("_", "-"), value)
                for name, value in self._data.items()
            )
            head = Markup("<svg") + noted + head[len("<svg") :]
        return head + Markup("").join(self._shapes) + Markup("</svg>")


def _visible(run: Sequence[Point]) -> list[Point]:
    """The points of a run that bend the line as drawn; the rest lie on it within a hair.

    References
    ----------
    D. H. Douglas and T. K. Peucker, "Algorithms for the reduction of the number of points
    required to represent a digitized line or its caricature", Cartographica 10(2), 1973.
    """
    kept = {0, len(run) - 1}
    pending = [(0, len(run) - 1)]
    while pending:
        first, last = pending.pop()
        if last - first < 2:  # no point lies between
            continue
        distances = [_off_line(run[i], run[first], run[last]) for i in range(first + 1, last)]
        farthest = max(distances)
        if farthest > _HAIR_PX:
            bend = first + 1 + distances.index(farthest)
            kept.add(bend)
            pending += [(first, bend), (bend, last)]
    return [run[index] for index in sorted(kept)]


def _off_line(point: Point, start: Point, end: Point) -> float:
    """Distance of a point from the straight line through two others."""
    along_x, along_y = end[0] - start[0], end[1] - start[1]
    across = along_x * (start[1] - point[1]) - along_y * (start[0] - point[0])
    length = math.hypot(along_x, along_y)
    return abs(across) / length if length else math.dist(point, start)


def _px(value: float) -> str:
    text = f"{value:.1f}"
    return text.removesuffix(".0") if text != "-0.0" else "0"
