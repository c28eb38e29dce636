"""SVG pictures made fit to stand inside an HTML page, many of them side by side."""

from __future__ import annotations

import re
from html import escape

ENLARGED = 1.2
"""Pictures are drawn for paper; a screen is read from further away."""


def inline_svg(svg: str, name: str, description: str) -> str:
    """The picture without prolog and metadata, as wide as its place, and with element names of its own.

    svg : a whole SVG file, as text.
    name : identifier that no other picture of the page has; every id gets it as a prefix.
    description : read out to those who cannot see the picture.
    """
    body = svg[svg.index("<svg") :]
    body = re.sub(r"<metadata>.*?</metadata>\s*", "", body, flags=re.DOTALL)
    body = re.sub(r'\bid="([^"]+)"', rf'id="{name}-\1"', body)
    body = re.sub(r'href="#([^"]+)"', rf'href="#{name}-\1"', body)
    body = re.sub(r"url\(#([^)]+)\)", rf"url(#{name}-\1)", body)
    # A hundredth of a point is finer than any screen or printer: half the size for nothing lost.
    body = re.sub(r'\bd="[^"]*"', lambda path: re.sub(r"(\.\d\d)\d+", r"\1", path[0]), body)
    opening, rest = body.split(">", 1)
    size = dict(re.findall(r'\b(width|height)="([\d.]+)pt"', opening))
    opening = re.sub(r'\s(?:width|height)="[^"]*"', "", opening)
    label = escape(description, quote=True)
    style = f"max-width: {ENLARGED * float(size['width']) / 72:.2f}in"
    return f'{opening} role="img" aria-label="{label}" style="{style}">{rest.rstrip()}'
