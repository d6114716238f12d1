"""The one place that writes SVG: shapes with plain attributes, no style sheet, no script."""

from __future__ import annotations

from collections.abc import Iterable
from html import escape

INK = "#1f2328"
MUTED = "#59626d"
GRID = "#dde1e5"
PAPER = "#ffffff"
BLUE = "#0b5394"
ORANGE = "#b34700"
FONT = "system-ui, 'Segoe UI', 'DejaVu Sans', sans-serif"
TEXT_PX = 12.5


def number(value: float) -> str:
    """A coordinate in at most one decimal."""
    text = f"{value:.1f}"
    return text[:-2] if text.endswith(".0") else text


class Drawing:
    """An SVG picture that is put together shape by shape; all coordinates in px of its own ``width``."""

    def __init__(self, width: float, height: float, alternative: str) -> None:
        self.width, self.height = width, height
        self._alternative = alternative
        self._parts: list[str] = []

    def add(self, tag: str, text: str = "", **attributes: object) -> None:
        """One element; ``stroke_width`` becomes ``stroke-width``, None leaves an attribute out."""
        written = "".join(
            f' {name.rstrip("_").replace("_", "-")}="{_value(value)}"'
            for name, value in attributes.items()
            if value is not None
        )
        self._parts.append(f"<{tag}{written}>{escape(text)}</{tag}>" if text else f"<{tag}{written}/>")

    def line(self, x1: float, y1: float, x2: float, y2: float, colour: str = GRID, **more: object) -> None:
        """A straight line."""
        self.add("line", x1=x1, y1=y1, x2=x2, y2=y2, stroke=colour, **more)

    def rect(self, x: float, y: float, width: float, height: float, fill: str, **more: object) -> None:
        """A rectangle."""
        self.add("rect", x=x, y=y, width=max(width, 0.0), height=max(height, 0.0), fill=fill, **more)

    def crossed(self, x: float, y: float, side: float, colour: str) -> None:
        """A square with a slanting line: part of something is missing."""
        self.rect(x, y, side, side, "none", stroke=colour)
        self.line(x, y + side, x + side, y, colour)

    def text(
        self,
        x: float,
        y: float,
        words: str,
        anchor: str = "start",
        colour: str = MUTED,
        size: float = TEXT_PX,
        **more: object,
    ) -> None:
        """Words that begin, centre or end at a place."""
        self.add(
            "text", words, x=x, y=y, text_anchor=anchor, fill=colour, font_size=size, font_family=FONT, **more
        )

    def path(self, runs: Iterable[Iterable[tuple[float, float]]], colour: str, **more: object) -> None:
        """Broken lines through points, one for each run."""
        steps = ["M" + "L".join(f"{number(x)} {number(y)}" for x, y in run) for run in runs]
        if steps:
            self.add("path", d="".join(steps), stroke=colour, fill="none", stroke_linejoin="round", **more)

    def dots(self, points: Iterable[tuple[float, float]], colour: str, size: float, **more: object) -> None:
        """Round dots."""
        steps = "".join(f"M{number(x)} {number(y)}h0" for x, y in points)
        if steps:
            self.add("path", d=steps, stroke=colour, stroke_width=size, stroke_linecap="round", **more)

    def area(self, points: Iterable[tuple[float, float]], fill: str, **more: object) -> None:
        """A filled outline."""
        self.add(
            "path", d="M" + "L".join(f"{number(x)} {number(y)}" for x, y in points) + "Z", fill=fill, **more
        )

    def __str__(self) -> str:
        return (
            f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {number(self.width)} {number(self.height)}" '
            f'width="{number(self.width)}" height="{number(self.height)}" role="img" '
            f'aria-label="{escape(self._alternative)}">{"".join(self._parts)}</svg>'
        )


def _value(value: object) -> str:
    return number(value) if isinstance(value, float) else escape(str(value))
