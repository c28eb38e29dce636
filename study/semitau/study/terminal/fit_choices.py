"""How a model is fitted, as options of commands on template files ask for it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import wraps
from typing import TYPE_CHECKING, Any

import click
from semitau.core.errors import InputError, Problem

if TYPE_CHECKING:
    from semitau.core.templates import TemplateSet
    from semitau.fit.fitting.model import Model
    from semitau.fit.likelihood.constraints import Constraint


@dataclass(frozen=True)
class FitChoices:
    """Options as they were given, e.g. fix = ("R_D=0.3",)."""

    at: tuple[str, ...] = ()
    free: tuple[str, ...] = ()
    fix: tuple[str, ...] = ()
    exact_templates: bool = False
    likelihood: str = "light"
    constrain: tuple[str, ...] = ()
    bound: tuple[str, ...] = ()
    follow: tuple[str, ...] = ()
    apart: tuple[str, ...] = ()
    mirror: tuple[str, ...] = ()

    def model(self, templates: TemplateSet) -> Model:
        """The model. Raises InputError for options that make no sense, or name no parameter."""
        from semitau.core.quadratic import templates_at
        from semitau.fit.fitting.model import Model
        from semitau.fit.fitting.shape_and_rate import mirrored, split_shape_and_rate

        point = dict(_value(text, "--at", "NAME=NUMBER, e.g. SR=0.3") for text in self.at)
        templates = templates_at(templates, point) if point else templates
        kept = dict(_pair(text, "--mirror", "NAME=plus or NAME=minus") for text in self.mirror)
        return Model(
            split_shape_and_rate(mirrored(templates, kept), self.apart),
            template_statistics=not self.exact_templates,
            likelihood=self.likelihood,
            fixed=dict(_value(text, "--fix", "NAME=NUMBER, e.g. R_D=0.3") for text in self.fix),
            constraints=dict(_constraint(text) for text in self.constrain),
            bounds=dict(_range(text) for text in self.bound),
            functions=dict(_pair(text, "--follow", "NAME=FORMULA, e.g. R_Dst_B0=R_Dst_Bp") for text in self.follow),
            coefficients=self.free,
        )


_OPTIONS = (
    click.option(
        "--at",
        multiple=True,
        metavar="NAME=VALUE",
        help="Templates and injected ratios of another point of the coefficients, e.g. SR=0.3; may be repeated.",
    ),
    click.option(
        "--free", multiple=True, metavar="NAME", help="Fit a coefficient, which ratios then follow; may be repeated."
    ),
    click.option("--fix", multiple=True, metavar="NAME=VALUE", help="Hold a parameter; may be repeated."),
    click.option(
        "--constrain",
        multiple=True,
        metavar="NAME=LAW",
        help="gaussian:0.1, log-normal:0.1, uniform:0.5:1.5 or free; may be repeated.",
    ),
    click.option(
        "--bound", multiple=True, metavar="NAME=LOW:HIGH", help="Keep a parameter inside; either end may be left out."
    ),
    click.option(
        "--follow", multiple=True, metavar="NAME=FORMULA", help="Let a parameter follow others, e.g. R_Dst_B0=R_Dst_Bp."
    ),
    click.option("--apart", multiple=True, metavar="NAME", help="Shape and rate of a variation as two nuisances."),
    click.option("--mirror", multiple=True, metavar="NAME=SIDE", help="Keep plus or minus of a variation, mirror it."),
    click.option(
        "--likelihood",
        type=click.Choice(["light", "approximate", "exact"]),
        default="light",
        show_default=True,
        help="Its form for finite templates.",
    ),
    click.option("--exact-templates", is_flag=True, help="Take the templates as exact: no finite template statistics."),
)


def fit_choices(function: Callable[..., Any]) -> Callable[..., Any]:
    """Give a command the options of FitChoices, as one argument `choices`."""

    @wraps(function)
    def command(*args: Any, **given: Any) -> Any:
        chosen = {name: given.pop(name) for name in FitChoices.__dataclass_fields__}
        return function(*args, choices=FitChoices(**chosen), **given)

    decorated: Callable[..., Any] = command
    for decorate in reversed(_OPTIONS):
        decorated = decorate(decorated)
    return decorated


def _pair(text: str, option: str, wanted: str) -> tuple[str, str]:
    name, sign, value = text.partition("=")
    if not (sign and name.strip() and value.strip()):
        raise InputError(Problem("not a parameter and its value", where=option, got=repr(text), wanted=wanted))
    return name.strip(), value.strip()


def _numbers(parts: Sequence[str], text: str, option: str, wanted: str) -> list[float]:
    try:
        return [float(part) for part in parts]
    except ValueError:
        raise InputError(Problem("not a number", where=option, got=repr(text), wanted=wanted)) from None


def _value(text: str, option: str, wanted: str) -> tuple[str, float]:
    name, value = _pair(text, option, wanted)
    try:
        return name, float(value)
    except ValueError:
        raise InputError(
            Problem("not a parameter and its value", where=option, got=repr(text), wanted=wanted)
        ) from None


def _constraint(text: str) -> tuple[str, Constraint | None]:
    from semitau.fit.likelihood.constraints import Gaussian, LogNormal, Uniform

    wanted = "NAME=gaussian:0.1, NAME=log-normal:0.1, NAME=uniform:0.5:1.5 or NAME=free"
    name, value = _pair(text, "--constrain", wanted)
    law, *parts = value.split(":")
    numbers = _numbers(parts, text, "--constrain", wanted)
    match law, numbers:
        case "free", []:
            return name, None
        case "gaussian", [sigma]:
            return name, Gaussian(sigma)
        case "log-normal", [sigma]:
            return name, LogNormal(sigma)
        case "uniform", [low, high]:
            return name, Uniform(low, high)
    raise InputError(Problem("not a constraint", where="--constrain", got=repr(text), wanted=wanted))


def _range(text: str) -> tuple[str, tuple[float | None, float | None]]:
    wanted = "NAME=LOW:HIGH, e.g. R_D=0:1 or R_D=0:"
    name, value = _pair(text, "--bound", wanted)
    ends = value.split(":")
    if len(ends) != 2:
        raise InputError(Problem("not a range", where="--bound", got=repr(text), wanted=wanted))
    low, high = (_numbers([end], text, "--bound", wanted)[0] if end.strip() else None for end in ends)
    return name, (low, high)
