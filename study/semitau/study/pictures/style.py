"""How the pictures look: colours that colour-blind readers can tell apart, thin rules, nothing without a meaning.

Hues are those of Okabe and Ito ("Color Universal Design", 2008): distinct with every common colour blindness.
A ratio has a hue: its signal is drawn in the full colour, the decay that normalises it in a tint of it.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from ..results import ComponentInfo

INK = "#1d2329"
QUIET = "#68717a"
RULE = "#c9ced3"
BAND = "#8d969e"
PAPER = "#ffffff"

RATIO_HUES = ("#d55e00", "#0072b2", "#cc79a7", "#56b4e9")
NORMALISATION_TINTS = ("#f6cfb0", "#b4d4ea", "#efd3e2", "#d4ebf9")
FEED_DOWN_HUES = ("#35a886", "#00573f", "#c7e8de", "#8fd3bf")
BACKGROUND_HUES = ("#dcdfe2", "#c0c5ca", "#a3aab1", "#868f97", "#eceef0", "#727b84")

RC: dict[Any, Any] = {
    "font.family": "DejaVu Sans",
    "font.size": 8.5,
    "axes.edgecolor": QUIET,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.7,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.titlesize": 9.5,
    "axes.titlelocation": "left",
    "axes.axisbelow": True,
    "text.color": INK,
    "xtick.color": QUIET,
    "ytick.color": QUIET,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "xtick.labelsize": 8,
    "ytick.labelsize": 8,
    "xtick.major.width": 0.7,
    "ytick.major.width": 0.7,
    "xtick.major.size": 3,
    "ytick.major.size": 3,
    "legend.frameon": False,
    "legend.fontsize": 8,
    "figure.facecolor": PAPER,
    "savefig.facecolor": PAPER,
    "lines.linewidth": 1.2,
    # Same input, same bytes: element names in SVG are hashed with this instead of a random salt.
    "svg.hashsalt": "semitau",
    "svg.fonttype": "path",
    "path.simplify": False,
}


def ratio_colour(index: int) -> str:
    """The full colour of the ratio number `index`."""
    return RATIO_HUES[index % len(RATIO_HUES)]


def component_colours(components: Sequence[ComponentInfo], ratios: Sequence[str]) -> dict[str, str]:
    """Colour of each component by its role and the ratio it belongs to."""
    ratio_of_yield = {
        scale: name
        for component in components
        for name in component.scales_with
        if name in ratios
        for scale in component.scales_with
        if scale != name
    }
    colours: dict[str, str] = {}
    feed_down, background = iter(FEED_DOWN_HUES * len(components)), iter(BACKGROUND_HUES * len(components))
    for component in components:
        ratio = next((name for name in component.scales_with if name in ratios), None)
        normalises = next((ratio_of_yield[name] for name in component.scales_with if name in ratio_of_yield), None)
        if ratio is not None:
            colours[component.name] = ratio_colour(ratios.index(ratio))
        elif component.role == "normalisation" and normalises is not None:
            colours[component.name] = NORMALISATION_TINTS[ratios.index(normalises) % len(NORMALISATION_TINTS)]
        elif component.role == "background":
            colours[component.name] = next(background)
        else:
            colours[component.name] = next(feed_down)
    return colours
