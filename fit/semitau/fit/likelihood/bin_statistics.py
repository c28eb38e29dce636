"""What one bin says when its templates are finite: three forms of the likelihood with its factors profiled.

`light` has one factor γ a bin with a Gaussian auxiliary measurement (J. S. Conway, arXiv:1103.0354); `approximate` one
factor with a Poisson one of as many effective counts as the bin's templates have (EPJC 82 (2022) 1043); `exact` one
factor for each component with the Poisson number of its own effective counts (R. Barlow, C. Beeston, Comput. Phys.
Commun. 77 (1993) 219). All are counted from the saturated model.

Effective counts: a template content T with variance V fluctuates like a = T²/V counts of weight V/T each, which gives
the Poisson law its mean and variance; for unit weights a is the number of events.
"""

from __future__ import annotations

import numpy as np
from semitau.core.compiled import inlined
from semitau.core.elementary import log

ROUNDS_AT_MOST = 100


@inlined
def deviance(n: float, mu: float) -> float:
    """μ - n + n ln(n/μ), accurate to its own last digits: n and μ cancel down to the square of their distance.

    ln(n/μ) = 2 artanh(r) with r = (n - μ)/(n + μ), which gives (n - μ) r + 2n (artanh(r) - r); the series for small r.
    """
    total = n + mu
    r = (n - mu) / total if total > 0.0 else 0.0
    t = r * r
    series = t * r * (1 / 3 + t * (1 / 5 + t * (1 / 7 + t * (1 / 9 + t * (1 / 11 + t * (1 / 13 + t * (1 / 15)))))))
    near = (n - mu) * r + 2.0 * n * series
    far = mu - n + n * log(n / mu if n > 0.0 else 1.0)
    return near if t < 0.01 else far


@inlined
def bin_terms(mu: float, n: float, centre: float, variance: float) -> tuple[float, float, float, float]:
    """Light form: -ln L from the saturated model, its first and second derivative in μ, and γ.

    variance : squared relative error of the expectation. γ is the root of γ² + γ(μv - γ₀) - nv = 0.
    """
    b = mu * variance - centre
    root = np.sqrt(b * b + 4.0 * n * variance)
    # Both are the positive root; the first has no cancellation where b > 0. Without counts it is max(0, -b).
    gamma = 2.0 * n * variance / (b + root) if b > 0.0 else 0.5 * (root - b)
    seen = n > 0.0
    # (γ - γ₀)/v = n/γ - μ at the root: of both ways to the difference the one that loses fewer digits.
    pull = variance * (n / gamma - mu) if seen and mu * variance < 1.0 else gamma - centre
    value = deviance(n, gamma * mu) + (0.5 * pull * pull / variance if variance > 0.0 else 0.0)
    first = gamma - n / mu
    second = n / (mu * mu) - (gamma * variance / root if root > 0.0 else 0.0)
    return value, first, second, gamma


@inlined
def effective_terms(
    mu: float, n: float, centre: float, variance: float
) -> tuple[float, float, float, float, float, float, float]:
    """Approximate form: -ln L; its derivatives in μ, in V; second ones in μμ, μV, VV; and the factor β.

    variance : V of the expectation, events squared. With k = μ²/V effective counts, β = (n + kβ₀)/(μ + k) and
    -ln L = D(n; βμ) + D(kβ₀; kβ), D(n; μ) = μ - n + n ln(n/μ). V moves with the yields, and so does k.
    """
    known = variance > 0.0
    v = variance if known else 1.0
    k = mu * mu / v
    beta = (n + k * centre) / (mu + k) if known else centre
    q = deviance(centre, beta)  # derivative in k
    value = deviance(n, beta * mu) + (k * q if known else 0.0)
    # In (μ, k); β falls with μ, and moves to its centre with k.
    share = 1.0 / (mu + k)
    mu_1 = beta - n / mu
    mu_2 = n / (mu * mu) - (beta * share if known else 0.0)
    mu_k = (centre - beta) * share
    k_2 = -(beta - centre) * (beta - centre) * share / (beta if beta > 0.0 else 1.0)
    # In (μ, V).
    k_mu, k_v = 2.0 * mu / v, -k / v
    first = mu_1 + k_mu * q
    first_v = k_v * q
    second = mu_2 + 2.0 * k_mu * mu_k + k_mu * k_mu * k_2 + 2.0 / v * q
    mixed = k_v * mu_k + k_mu * k_v * k_2 - 2.0 * mu / (v * v) * q
    second_v = k_v * k_v * k_2 + 2.0 * k / (v * v) * q
    return (
        value,
        first if known else mu_1,
        first_v if known else 0.0,
        second if known else mu_2,
        mixed if known else 0.0,
        second_v if known else 0.0,
        beta,
    )
