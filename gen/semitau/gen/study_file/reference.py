"""The reference of study files, table by table, made from the models so that it cannot drift from them.

docs/study_file.md holds it below its introduction; `python -m semitau.gen.study_file.reference` prints it.
"""

from __future__ import annotations

import inspect
from collections.abc import Iterator, Mapping
from typing import Any

from .names import OBSERVABLES
from .rules import shown
from .study import StudyConfig, json_schema

# Headings in the order of the document, and the models (by name) below each.
SECTIONS: dict[str, tuple[str, ...]] = {
    "[study]": ("StudySection",),
    "[experiment]": ("Experiment",),
    "[form_factors]": ("FormFactors",),
    "[branching_fractions]": ("BranchingFractionTables",),
    "[wilson]": ("Wilson",),
    "[wilson.e] and [wilson.mu]": ("Couplings",),
    "[quadratic]": ("Quadratic",),
    "[[quadratic.form_factors]]": ("FormFactorShifts",),
    "[radiation]": ("RadiationSection",),
    "[[mode]]": ("Mode",),
    "[[double_charm]]": ("DoubleCharm",),
    "[[background]]": ("Background",),
    "Laws of a background": (
        "Exponential",
        "Gaussian",
        "DoubleGaussian",
        "Power",
        "Threshold",
        "EndPoint",
        "PhaseSpace",
        "Uniform",
        "Polynomial",
        "Histogram",
        "Column",
    ),
    "[detector]": ("Detector",),
    "[detector.tag]": ("Tag",),
    "[detector.tracks]": ("Tracks",),
    "[detector.photons]": ("Photons",),
    "[detector.soft_pion]": ("SoftPion", "RandomSoft"),
    "[detector.lepton_id]": ("LeptonIdentification",),
    "[detector.charm]": ("Charm",),
    "[detector.residual_energy]": ("ResidualEnergy",),
    "[selection]": ("Cut",),
    "[[category]]": ("CategoryTable",),
    "[[variation]]": (
        "FormFactor",
        "FormFactorDirection",
        "FormFactorDirections",
        "ComponentFraction",
        "BranchingFractionChange",
        "DoubleCharmShare",
        "ProductionRatio",
        "SoftPionEfficiency",
        "LeptonIdentificationEfficiency",
        "Misidentification",
        "TagResolution",
        "MomentumScale",
        "ResidualEnergyScale",
    ),
    "[fit]": ("FitSection",),
    "[fit.bounds]": ("Bounds",),
    "[[fit.correlated]]": ("Correlated",),
    "[toys]": ("Toys",),
    "[sizing]": ("SizingSection",),
    "[[alternative]]": ("Alternative",),
    "[bias]": ("BiasSection",),
    "[design]": ("DesignSection",),
    "[design.cuts]": ("ScannedCut",),
    "[reach]": ("ReachSection",),
    "[average]": ("AverageStudySection", "Shifts"),
    "[import]": ("Imports", "ImportedComponent", "ImportedSides", "ImportedData"),
    "[blinding]": ("Blinding",),
    "Values with a short form": (
        "FormFactorSource",
        "Axis",
        "Curve",
        "PerParent",
        "PerCharm",
        "Yield",
        "GivenFraction",
        "FitData",
        "Constraint",
        "Linearity",
        "ComparedValue",
    ),
}


def reference() -> str:
    """Markdown: a section for each table of a study file, and a row for each key."""
    return "\n".join(_lines()) + "\n"


def _lines() -> Iterator[str]:
    models: Mapping[str, Mapping[str, Any]] = json_schema()["$defs"]
    yield "## Observables"
    yield ""
    yield "| name | meaning | unit |"
    yield "| --- | --- | --- |"
    for name, observable in OBSERVABLES.items():
        yield f"| `{name}` | {observable.label} | {observable.unit} |"
    for heading, names in SECTIONS.items():
        yield ""
        yield f"## {heading}"
        for name in names:
            yield from _model(name, models[name], alone=len(names) == 1)


def _model(name: str, schema: Mapping[str, Any], *, alone: bool) -> Iterator[str]:
    table = schema["anyOf"][1] if "anyOf" in schema else schema
    properties: Mapping[str, Mapping[str, Any]] = table["properties"]
    constant = next((value["const"] for value in properties.values() if "const" in value), None)
    if not alone:
        yield ""
        yield f"### {name if constant is None else constant}"
    yield ""
    yield inspect.cleandoc(table["description"])
    yield ""
    yield "| key | value | default | meaning |"
    yield "| --- | --- | --- | --- |"
    for key, value in properties.items():
        default = "needed" if key in table.get("required", ()) else _default(value)
        yield f"| `{key}` | {_kind(value)} | {default} | {value.get('description', '')} |"


def _default(value: Mapping[str, Any]) -> str:
    default = value.get("default")
    if "$ref" in value and _name(value) not in SHORT:
        return "see there"
    if isinstance(default, Mapping):
        default = {key: item for key, item in default.items() if item is not None}
        if set(default) == {"name"}:
            return f"`{shown(default['name'])}`"
        if "kind" in default:
            return f"`{shown(default['kind'])}`"
        if default.get("momentum") == [0.0]:
            return f"`{default['value'][0]}`"
    return "" if default is None or default in ({}, []) else f"`{shown(default)}`"


SHORT = SECTIONS["Values with a short form"]


def _kind(value: Mapping[str, Any]) -> str:
    """The type of a value in words."""
    if "anyOf" in value:
        kinds = [_kind(choice) for choice in value["anyOf"] if choice.get("type") != "null"]
        kinds = [kind for kind in dict.fromkeys(kinds) if kind != "unit"]
        return " or ".join(kinds) + (" or with a unit" if _has_unit(value) else "")
    if "$ref" in value:
        return _name(value)
    if "const" in value:
        return f"`{shown(value['const'])}`"
    if "enum" in value:
        return ", ".join(f"`{shown(word)}`" for word in value["enum"])
    match value.get("type"):
        case "array" if "prefixItems" in value:
            return f"{len(value['prefixItems'])} × {_kind(value['prefixItems'][0])}"
        case "array":
            return f"list of {_kind(value['items'])}"
        case "object":
            items = value["additionalProperties"]
            if not isinstance(items, Mapping):
                return "table"
            return "table of laws" if "oneOf" in items else f"table of {_kind(items)}"
        case "number":
            return _limits("number", value) + (f" in {value['description']}" if _is_unit(value) else "")
        case "integer":
            return _limits("whole number", value)
        case "boolean":
            return "`true`, `false`"
        case "string" if "with a unit" in value.get("description", ""):
            return "unit"
    return "text"


def _limits(kind: str, value: Mapping[str, Any]) -> str:
    signs = {"minimum": "≥", "exclusiveMinimum": ">", "maximum": "≤", "exclusiveMaximum": "<"}
    limits = [f"{sign} {value[key]:g}" for key, sign in signs.items() if key in value]
    return " ".join([kind, ", ".join(limits)]).strip()


def _is_unit(value: Mapping[str, Any]) -> bool:
    return value.get("description", "") in ("GeV", "rad", "the observable's unit")


def _has_unit(value: Mapping[str, Any]) -> bool:
    return any(_kind(choice) == "unit" for choice in value["anyOf"])


def _name(value: Mapping[str, Any]) -> str:
    return str(value["$ref"]).rsplit("/", 1)[-1]


def models_in_reference() -> set[str]:
    """Names of all models that have a section; with StudyConfig itself these are all there are."""
    return {name for names in SECTIONS.values() for name in names} | {StudyConfig.__name__}


if __name__ == "__main__":
    print(reference(), end="")
