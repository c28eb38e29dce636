"""Places in a study file as messages name them: "marlow.toml:12: mode[D_tau].events"."""

from __future__ import annotations

import re
import tomllib

from semitau.core.toml_lines import TomlLines

from .sections import Place
from .study import StudyConfig

# The keys that name an element of an array of tables; without them elements are counted from 1.
_NAMES = ("component", "name")


def key_of(place: Place, data: object) -> str:
    """Keys on the way to `place` in `data`, which is as read from TOML: mode[D_tau].events; "" for the top."""
    text = ""
    for part in place:
        if isinstance(part, int):
            element = data[part] if isinstance(data, list) and part < len(data) else None
            name = next(
                (element[k] for k in _NAMES if isinstance(element, dict) and isinstance(element.get(k), str)), ""
            )
            text += f"[{name or part + 1}]"
            data = element
        else:
            plain = re.fullmatch(r"[A-Za-z0-9_-]+", part)
            text += ("." if text else "") + (part if plain else f'"{part}"')
            data = data.get(part) if isinstance(data, dict) else None
    return text


def place_in(study: StudyConfig, *place: str | int) -> str:
    """ "file:line: key" of a place in the study; "key" alone if the study was not read from a file."""
    if not study.text:
        return key_of(place, {})
    data = tomllib.loads(study.text)
    return f"{study.path}:{TomlLines(study.text).line(place)}: {key_of(place, data)}"
