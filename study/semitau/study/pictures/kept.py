"""Pictures that are there already: their files name what they were drawn from, so the same ones are not drawn again."""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
from importlib.metadata import version
from pathlib import Path

from pydantic import BaseModel
from semitau.core.code_digest import code_digest
from semitau.core.content_digest import content_digest

from .sheet import Picture, Sheet

SVG_END, PNG_END = "</svg>", b"IEND\xaeB`\x82"


def picture_key(name: str, title: str, caption: str, draw: Callable[[], Sheet]) -> str:
    """Digest of all that a picture shows and of the code that draws it; "" for drawings that hide what they take.

    draw : a partial, of a function of this package and of what it draws.
    """
    if not isinstance(draw, partial):
        return ""
    shown = [_plain(value) for value in (*draw.args, *draw.keywords.items())]
    code = (draw.func.__qualname__, code_digest("study"), version("matplotlib"))
    return content_digest(name, title, caption, code, shown)


def kept_picture(folder: Path, name: str, title: str, caption: str, key: str) -> Picture | None:
    """The picture, if both its files are whole and were drawn from what `key` stands for."""
    if not key:
        return None
    try:
        svg = (folder / f"{name}.svg").read_text(encoding="utf-8")
        png = (folder / f"{name}.png").read_bytes()
    except (OSError, UnicodeDecodeError):
        return None
    whole = svg.rstrip().endswith(SVG_END) and png.endswith(PNG_END)
    return Picture(name, title, caption, svg) if whole and key in svg and key.encode() in png else None


def _plain(value: object) -> object:
    """Models as what they hold, wherever they stand."""
    if isinstance(value, BaseModel):
        return type(value).__qualname__, value.model_dump(mode="json")
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    return value
