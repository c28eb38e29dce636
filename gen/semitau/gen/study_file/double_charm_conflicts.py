"""Rules between [[double_charm]], the tag, and the variations of its composition."""

from __future__ import annotations

from collections.abc import Iterator

from .double_charm import DoubleCharm
from .rules import shown
from .sections import Conflict, Sections
from .variations import DoubleCharmShare


def double_charm_conflicts(sections: Sections) -> Iterator[Conflict]:
    """No decay belongs to two components; something can be reconstructed; variations of shares act on something."""
    owner: dict[tuple[str, ...], str] = {}
    for i, item in sections.double_charms.items():
        decays = [
            (p, c, b, lepton) for p in item.parents for c in item.charm for b in item.beside for lepton in item.leptons
        ]
        for parent, charm, beside, lepton in decays:
            if (first := owner.setdefault((parent, charm, beside, lepton), item.name)) != item.name:
                text = f"{parent} → {charm} {beside} with {lepton}"
                remedy = "Take it out of one of them."
                yield Conflict(("double_charm", i), f"holds a decay that is in {first} too", text, remedy=remedy)
                break
        if not item.sources:
            what = "is a component with no events"
            remedy = "A tau comes from D_s alone: add e and mu to leptons, or D_s to beside."
            yield Conflict(("double_charm", i), what, f"no {' and '.join(item.leptons)} from it", remedy=remedy)
        tag = sections.detector.tag.efficiency if sections.detector is not None else None
        if tag is not None and not any(tag[parent] for parent in item.parents):
            remedy = "Raise [detector.tag] efficiency or remove the component."
            got = f"no tag for {' and '.join(item.parents)}"
            yield Conflict(("double_charm", i), "is a component with no events", got, remedy=remedy)
    if "double_charm" not in sections.whole:
        return
    for i, variation in sections.variations.items():
        if isinstance(variation, DoubleCharmShare) and not any(
            mixes(item, variation) for item in sections.double_charms.values()
        ):
            key = "source" if variation.beside is None else "beside"
            what = "acts on nothing: no [[double_charm]] mixes it with others"
            yield Conflict(("variation", i, key), what, shown(variation.beside or variation.source))


def mixes(item: DoubleCharm, variation: DoubleCharmShare) -> bool:
    """Whether a component has what the variation is about, and something else."""
    if variation.beside is not None:
        return variation.beside in item.beside and len(item.beside) > 1
    return variation.source in item.sources and len(item.sources) > 1
