"""What all tables of a study file share: strict frozen models, numbers with units, rules with advice."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable
from difflib import get_close_matches
from itertools import pairwise
from typing import Annotated, Any, ClassVar

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, GetJsonSchemaHandler, WithJsonSchema
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import CoreSchema, PydanticCustomError

from .names import OBSERVABLES
from .units import UNITS, UnitError, quantity

RULE = "semitau_rule"


class Table(BaseModel):
    """A table of the study file: keys are checked, values are not converted, instances do not change."""

    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False)


def broken(what: str, wanted: str = "", remedy: str = "", got: str | None = None) -> PydanticCustomError:
    """The error of a broken rule; `got` defaults to the value found in the file ("" hides it)."""
    context = {"what": what, "wanted": wanted, "remedy": remedy, "got": got}
    return PydanticCustomError(RULE, "{what}", context)


def shown(value: object) -> str:
    """A value as the study file would write it, cut to a length that fits a message."""
    if isinstance(value, bool):
        text = str(value).lower()
    elif isinstance(value, str):
        text = json.dumps(str(value), ensure_ascii=False)
    elif isinstance(value, dict):
        text = "{ " + ", ".join(f"{key} = {shown(item)}" for key, item in value.items()) + " }" if value else "{}"
    elif isinstance(value, list | tuple):
        text = "[" + ", ".join(map(shown, value)) + "]"
    else:
        text = str(value)
    return text if len(text) <= 80 else text[:77].rstrip(" =,") + " ..."


def suggestion(given: object, known: Iterable[str]) -> str:
    """ "Did you mean ...?" if a known word is near to `given`; else ""."""
    if not isinstance(given, str):
        return ""
    folded = {word.casefold(): word for word in known}
    near = get_close_matches(given.casefold(), folded, n=1, cutoff=0.5)
    return f'Did you mean "{folded[near[0]]}"?' if near else ""


class ShortTable(Table):
    """A table that may be written short, as a word, a number or a list; `short_schema` is the JSON schema of that."""

    short_schema: ClassVar[dict[str, Any]]

    @classmethod
    def __get_pydantic_json_schema__(cls, core: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        table = handler.resolve_ref_schema(handler(core))
        return {"anyOf": [cls.short_schema, table], "description": cls.__doc__}


def _in(dimension: str) -> tuple[BeforeValidator, WithJsonSchema]:
    def convert(value: Any) -> Any:
        if not isinstance(value, str):
            return value
        try:
            return quantity(value, dimension)
        except UnitError as error:
            raise broken(error.what, error.wanted, error.remedy) from None

    unit = next(iter(UNITS[dimension]))
    text = {"type": "string", "description": f"with a unit: {', '.join(UNITS[dimension])}"}
    schema = {"anyOf": [{"type": "number", "description": unit}, text]}
    return BeforeValidator(convert), WithJsonSchema(schema)


class Dimensioned(str):
    """A string found where the observable, and so the dimension of a quantity, is known."""

    dimension: str

    def __new__(cls, text: str, dimension: str) -> Dimensioned:
        self = super().__new__(cls, text)
        self.dimension = dimension
        return self


def _with_dimension(given: Any, dimension: str) -> Any:
    if isinstance(given, str):
        return Dimensioned(given, dimension)
    if isinstance(given, dict):
        return {key: _with_dimension(value, dimension) for key, value in given.items()}
    if isinstance(given, list | tuple):
        return [_with_dimension(value, dimension) for value in given]
    return given


def _know_dimensions(given: Any) -> Any:
    if not isinstance(given, dict):
        return given
    return {
        key: _with_dimension(value, OBSERVABLES[key].dimension) if key in OBSERVABLES else value
        for key, value in given.items()
    }


# Tells the quantities below a table keyed by observable which unit they need.
ByObservable = BeforeValidator(_know_dimensions)


def _known_observable(name: str) -> str:
    if name not in OBSERVABLES:
        raise broken("is no observable", ", ".join(OBSERVABLES), suggestion(name, OBSERVABLES), got=name)
    return name


def _by_dimension(value: Any) -> Any:
    if not isinstance(value, str):
        return value
    try:
        return quantity(value, value.dimension if isinstance(value, Dimensioned) else "energy")
    except UnitError as error:
        raise broken(error.what, error.wanted, error.remedy) from None


def _whole(value: Any) -> Any:
    # 4e5 is a float in TOML, yet reads better than 400000
    return int(value) if isinstance(value, float) and value.is_integer() and abs(value) < 2**53 else value


def rule(holds: Callable[[Any], bool], what: str, wanted: str = "", remedy: str = "") -> AfterValidator:
    """A check on a converted value, with its own words."""

    def check(value: Any) -> Any:
        if not holds(value):
            raise broken(what, wanted, remedy)
        return value

    return AfterValidator(check)


_strict = Field(strict=True, allow_inf_nan=False)
_energy, _energy_schema = _in("energy")
_angle, _angle_schema = _in("angle")

Text = Annotated[str, Field(strict=True, min_length=1)]
Flag = Annotated[bool, Field(strict=True)]
Identifier = Annotated[
    str,
    Field(strict=True),
    rule(
        lambda text: text.isascii() and text.isidentifier(),
        "is no identifier",
        "letters, digits and _, not starting with a digit",
    ),
]
Number = Annotated[float, _strict]
Positive = Annotated[float, _strict, Field(gt=0)]
NotNegative = Annotated[float, _strict, Field(ge=0)]
Fraction = Annotated[float, _strict, Field(ge=0, le=1)]
Count = Annotated[
    int,
    BeforeValidator(_whole),
    Field(strict=True, gt=0),
    WithJsonSchema({"type": "integer", "exclusiveMinimum": 0}),
]
Several = Annotated[
    int, BeforeValidator(_whole), Field(strict=True, ge=2), WithJsonSchema({"type": "integer", "minimum": 2})
]
Seed = Annotated[int, Field(strict=True, ge=0, lt=2**63)]
Energy = Annotated[float, _energy, _energy_schema, _strict]
# Where an observable is named as a key.
ObservableKey = Annotated[
    str, AfterValidator(_known_observable), WithJsonSchema({"type": "string", "enum": list(OBSERVABLES)})
]
# In the unit of the observable it belongs to.
Value = Annotated[
    float,
    BeforeValidator(_by_dimension),
    WithJsonSchema(
        {
            "anyOf": [
                {"type": "number", "description": "the observable's unit"},
                {"type": "string", "description": "with a unit"},
            ]
        }
    ),
    _strict,
]
Angle = Annotated[float, _angle, _angle_schema, _strict]
PositiveEnergy = Annotated[float, _energy, _energy_schema, _strict, Field(gt=0)]
PositiveAngle = Annotated[float, _angle, _angle_schema, _strict, Field(gt=0)]


def increasing(values: tuple[float, ...]) -> bool:
    """True if every value is larger than the one before."""
    return all(low < high for low, high in pairwise(values))


def distinct(values: tuple[object, ...]) -> bool:
    """True if no value stands twice."""
    return len(set(values)) == len(values)


Distinct = rule(distinct, "must not name anything twice")
Increasing = rule(increasing, "must increase", "each value larger than the one before")
