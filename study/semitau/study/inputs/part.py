"""What went into a study, in results.json."""

from __future__ import annotations

from pydantic import Field

from ..result_part import Part


class InputComponent(Part):
    """One component, and how many events stand behind it."""

    name: str = Field(description="Identifier")
    label: str = Field(description="Label for people")
    role: str = Field(description="signal, normalisation, feed-down or background")
    moves: str = Field(description="How the fit may move it: ratio, free, fixed, or a relative error")
    chains: int = Field(ge=0, description="Decay chains; 0 for a background by shape")
    generated: int = Field(ge=0, description="Generated decays or background events; 0 for an imported component")
    expected: float | None = Field(
        description="Decays of the study beside a tag, before acceptance, or background events before cuts; null for "
        "an imported component"
    )


class InputAxis(Part):
    """Bins of one observable."""

    observable: str = Field(description="Identifier")
    label: str = Field(description="Label for people")
    unit: str = Field(description='Unit, "" if none')
    edges: tuple[float, ...] = Field(description="Bin edges")


class InputCut(Part):
    """Limits on one observable."""

    observable: str = Field(description="Identifier")
    label: str = Field(description="Label for people")
    unit: str = Field(description='Unit, "" if none')
    low: float | None = Field(description="Lowest value that is kept; null if there is none")
    high: float | None = Field(description="Values from here on are dropped; null if there is none")


class InputCategory(Part):
    """One reconstructed final state."""

    name: str = Field(description="Identifier")
    label: str = Field(description="Label for people")
    axes: tuple[InputAxis, ...] = Field(description="Observables of its templates, in order")
    cuts: tuple[InputCut, ...] = Field(description="Cuts that apply to it")


class InputParameter(Part):
    """One form-factor parameter."""

    name: str = Field(description="Identifier")
    value: float = Field(description="Value that the templates were made with")
    error: float = Field(ge=0, description="Standard error of the set")


class InputFormFactors(Part):
    """Form factors of one transition."""

    transition: str = Field(description="D, Dst or Dss")
    label: str = Field(description="The transition for people")
    set: str = Field(description="Name or file of the set")
    parametrisation: str = Field(description="E.g. BCL")
    source: str = Field(description="Where the numbers come from")
    parameters: tuple[InputParameter, ...] = Field(description="In the order of the set")


class InputNumber(Part):
    """One number, or list of numbers, of the machine or the detector."""

    key: str = Field(description="Key of the study file, e.g. detector.tracks.efficiency")
    value: str = Field(description="Value, or value at each momentum; a default if the file does not have the key")
    unit: str = Field(description='Unit, "" if none')
    meaning: str = Field(description="What it is")


class InputVariation(Part):
    """One variation of the templates."""

    name: str = Field(description="Identifier of the nuisance")
    label: str = Field(description="Label for people")
    kind: str = Field(description="As in the study file")
    group: str = Field(description="Row of the budget")
    what: str = Field(description="What changes, and by how much")
    acts_on: tuple[str, ...] = Field(description="Components whose templates it changes")


class Inputs(Part):
    """What went in; the study file itself stands under `study`."""

    components: tuple[InputComponent, ...] = Field(description="In the order of the study file")
    categories: tuple[InputCategory, ...] = Field(description="In the order of the fit")
    form_factors: tuple[InputFormFactors, ...] = Field(description="One entry a transition")
    numbers: tuple[InputNumber, ...] = Field(description="Machine and detector, defaults included")
    variations: tuple[InputVariation, ...] = Field(description="In the order of the study file")
