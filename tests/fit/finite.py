"""The likelihood forms for finite templates a second time, without shared code: nested minimisation by scipy.

Nothing is profiled by formula here: for every bin the factors are minimised numerically.
"""

from __future__ import annotations

import numpy as np
from scipy.optimize import minimize
from semitau.core.templates import TemplateSet

from .reference import Array, Plain


def distance(n: float, mu: float) -> float:
    """Poisson -ln L from the saturated model."""
    return float(mu - n + (n * np.log(n / mu) if n > 0 else 0.0))


def contents(templates: TemplateSet, values: dict[str, float]) -> list[list[tuple[float, float, float]]]:
    """Bin by bin, the components' (content, variance at the injected yields, content there)."""
    bins: list[list[tuple[float, float, float]]] = []
    injected = {p.name: p.injected for p in templates.parameters}
    for category in templates.categories:
        mine: list[list[tuple[float, float, float]]] = [[] for _ in range(int(np.prod(category.shape)))]
        for component in templates.components:
            template = templates.templates.get((category.name, component.name))
            if template is None:
                continue
            scale = np.prod([values[name] / injected[name] for name in component.scales_with])
            now = scale * shifted(template, values)
            for i, row in enumerate(mine):
                row.append((float(now[i]), float(template.variance.ravel()[i]), float(template.nominal.ravel()[i])))
        bins += mine
    return bins


def shifted(template: object, values: dict[str, float]) -> Array:
    from .reference import bend

    nominal = template.nominal.ravel()  # type: ignore[attr-defined]
    out = nominal.copy()
    for name, plus in template.plus.items():  # type: ignore[attr-defined]
        minus = template.minus[name].ravel()  # type: ignore[attr-defined]
        out = out + (plus.ravel() - minus) / 2 * values[name]
        out = out + ((plus.ravel() + minus) / 2 - nominal) * bend(complex(values[name])).real
    return np.asarray(out, dtype=float)


def exact_bin(n: float, parts: list[tuple[float, float, float]]) -> float:
    """Minimum over one factor for each component, in logarithms, by scipy from several starts."""
    known = [(m, t * t / v) for m, v, t in parts if v > 0 and t != 0]
    rest = sum(m for m, v, t in parts if v == 0 or t == 0)
    if not known:
        return distance(n, rest)
    m, a = np.array([part[0] for part in known]), np.array([part[1] for part in known])

    def value(logs: Array) -> float:
        beta = np.exp(logs)
        f = rest + beta @ m
        if f <= 0:
            return 1e12
        return distance(n, f) + float(np.sum(a * (beta - 1 - logs)))

    best = np.inf
    for start in (0.0, 0.3, -0.3):
        found = minimize(value, np.full(a.size, start), method="Nelder-Mead" if a.size < 3 else "BFGS", tol=1e-12)
        found = minimize(value, found.x, method="BFGS", options={"gtol": 1e-9})
        best = min(best, float(found.fun))
    return best


def approximate_bin(n: float, parts: list[tuple[float, float, float]], scales: list[float]) -> float:
    """Minimum over the one factor β, by a golden-section search in its logarithm."""
    from scipy.optimize import minimize_scalar

    mu = sum(part[0] for part in parts)
    variance = sum(scale**2 * part[1] for scale, part in zip(scales, parts, strict=True))
    if variance == 0:
        return distance(n, mu)
    k = mu * mu / variance
    found = minimize_scalar(
        lambda log: distance(n, np.exp(log) * mu) + distance(k, np.exp(log) * k),
        bracket=(-1.0, 1.0), tol=1e-14,
    )  # fmt: skip
    return float(found.fun)


def value(templates: TemplateSet, x: Array, n: Array, form: str) -> float:
    """-ln L with constraints at their injected values."""
    plain = Plain(templates)
    values = dict(zip(plain.names, map(float, x), strict=True))
    injected = plain.injected
    total = float(np.real(plain.constraints(x)))
    bins = contents(templates, values)
    first = 0
    for category in templates.categories:
        names = [c for c in templates.components if (category.name, c.name) in templates.templates]
        scales = [float(np.prod([values[s] / injected[s] for s in c.scales_with])) for c in names]
        size = int(np.prod(category.shape))
        for i in range(first, first + size):
            if form == "exact":
                total += exact_bin(float(n[i]), bins[i])
            else:
                total += approximate_bin(float(n[i]), bins[i], scales)
        first += size
    return total
