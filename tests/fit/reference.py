"""The same likelihood written down a second time, plainly: numpy, one bin after the other, no shared code.

The interpolating polynomial comes from its seven conditions by linear algebra, and all functions take complex
parameters, so that gradients can be had by the complex step (W. Squire, G. Trapp, SIAM Review 40 (1998) 110).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from semitau.core.templates import TemplateSet

Array = NDArray[np.float64]


def polynomial(nominal: float, plus: float, minus: float) -> Array:
    """Coefficients c0..c6 with f(0), f(±1), f'(±1), f''(±1) given: slopes of the outer lines, no curvature."""
    rows, right = [], []
    for x, value, slope in ((1.0, plus, plus - nominal), (-1.0, minus, nominal - minus)):
        powers = np.arange(7)
        rows += [x**powers, powers * x ** np.maximum(powers - 1, 0)]
        rows += [powers * (powers - 1) * x ** np.maximum(powers - 2, 0)]
        right += [value, slope, 0.0]
    rows.append(np.eye(7)[0])
    right.append(nominal)
    return np.linalg.solve(np.array(rows), np.array(right))


UNIT_BEND = polynomial(0.0, 1.0, 1.0)


def bend(theta: complex) -> complex:
    if abs(theta.real) >= 1.0:
        return theta if theta.real > 0 else -theta
    return sum(c * theta**k for k, c in enumerate(UNIT_BEND))


class Plain:
    """Expectations and -ln L of a template set for parameters in the order scale parameters, nuisances."""

    def __init__(self, templates: TemplateSet, *, template_statistics: bool = True) -> None:
        self.templates = templates
        self.names = [p.name for p in templates.parameters] + [n.name for n in templates.nuisances]
        self.injected = dict.fromkeys(self.names, 0.0) | {p.name: p.injected for p in templates.parameters}
        sigmas = {p.name: p.constraint for p in templates.parameters} | {n.name: 1.0 for n in templates.nuisances}
        self.sigmas = [sigmas[name] for name in self.names]
        self.start = np.array([self.injected[name] for name in self.names])
        reference, variance = self.plain(self.start).real, self._variance()
        self.floor = 0.01 * reference
        self.relative = variance / reference**2 * template_statistics

    def _variance(self) -> Array:
        parts = []
        for category in self.templates.categories:
            parts.append(
                sum(
                    template.variance.ravel()
                    for (name, _), template in self.templates.templates.items()
                    if name == category.name
                )
            )
        return np.concatenate(parts)

    def plain(self, x: Array) -> NDArray[np.complex128]:
        values = dict(zip(self.names, np.asarray(x, dtype=complex), strict=True))
        out = []
        for category in self.templates.categories:
            total = np.zeros(category.shape, dtype=complex)
            for component in self.templates.components:
                template = self.templates.templates.get((category.name, component.name))
                if template is None:
                    continue
                contents = template.nominal.astype(complex)
                for name, plus in template.plus.items():
                    minus, theta = template.minus[name], values[name]
                    contents = contents + (plus - minus) / 2 * theta
                    contents = contents + ((plus + minus) / 2 - template.nominal) * bend(complex(theta))
                for name in component.scales_with:
                    contents = contents * values[name] / self.injected[name]
                total = total + contents
            out.append(total.ravel())
        return np.concatenate(out)

    def expected(self, x: Array) -> NDArray[np.complex128]:
        nu = self.plain(x)
        y = 1 - nu / self.floor
        return np.where(nu.real >= self.floor, nu, self.floor / (1 + y + y**2))

    def full(self, x: Array, gamma: Array, n: Array, gamma_centres: Array | float = 1.0) -> complex:
        """-ln L from the saturated model with the template-statistics factors as parameters of their own."""
        mu = gamma * self.expected(x)
        seen = n > 0
        total = np.sum(mu - n) + np.sum(n[seen] * np.log(n[seen] / mu[seen]))
        known = self.relative > 0
        return total + np.sum((gamma - gamma_centres)[known] ** 2 / (2 * self.relative[known])) + self.constraints(x)

    def constraints(self, x: Array, centres: Array | None = None) -> complex:
        middle = self.start if centres is None else centres
        pulls = [(x[i] - middle[i]) / s for i, s in enumerate(self.sigmas) if s is not None]
        return sum(0.5 * pull * pull for pull in pulls)

    def value(self, x: Array, n: Array, gamma_centres: Array | float = 1.0, centres: Array | None = None) -> complex:
        """With the factors at the root of their quadratic equation."""
        mu, v = self.expected(x), self.relative
        b = mu * v - gamma_centres
        gamma = (np.sqrt(b * b + 4 * n * v) - b) / 2
        gamma = np.where(v > 0, gamma, gamma_centres)
        gamma = np.where((n == 0) & (v > 0), np.where(b.real < 0, -b, 0), gamma)
        seen = n > 0
        total = np.sum(gamma * mu - n) + np.sum(n[seen] * np.log(n[seen] / (gamma * mu)[seen]))
        known = v > 0
        centre = np.broadcast_to(gamma_centres, v.shape)
        total += np.sum((gamma - centre)[known] ** 2 / (2 * v[known]))
        return total + self.constraints(x, centres)


def complex_step(function: Callable[[Array], complex], x: Array) -> Array:
    """Gradient of a function of real parameters that takes complex ones, to rounding."""
    step = 1e-30
    gradient = np.empty(x.size)
    for i in range(x.size):
        shifted = x.astype(complex)
        shifted[i] += 1j * step
        gradient[i] = function(shifted).imag / step
    return gradient
