"""The cut flow of the templates, as results.json has it."""

from __future__ import annotations

from semitau.core.templates import TemplateSet
from semitau.gen.templates.cut_flow import CutFlow

from ..results import CutFlowComponent


def cut_flow_parts(flow: CutFlow, templates: TemplateSet) -> tuple[CutFlowComponent, ...]:
    """One part for each component, in the order of the cut flow."""
    labels = {component.name: component.label for component in templates.components}
    return tuple(
        CutFlowComponent.model_validate(
            {
                "component": name,
                "label": labels.get(name, name),
                "steps": [
                    {
                        "name": step,
                        "events": float(flow.events[s, c]),
                        "efficiency": _share(float(flow.events[s, c]), float(flow.events[max(s - 1, 0), c])),
                    }
                    for s, step in enumerate(flow.steps)
                ],
                "purity": float(flow.purity[-1, c]),
            }
        )
        for c, name in enumerate(flow.components)
    )


def _share(part: float, whole: float) -> float:
    return part / whole if whole > 0 else 0.0
