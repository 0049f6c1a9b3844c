"""Posteriors with a known answer, in coordinates whose prior is a unit normal."""

from dataclasses import dataclass

import numpy as np
from scipy.special import logsumexp
from scipy.stats import multivariate_normal

from fogline.settings import SamplerSettings


def settings(**changes) -> SamplerSettings:
    values = {
        "walkers": 64,
        "ensembles": 2,
        "seed": 51,
        "target_ess": 4000,
        "max_rhat": 1.01,
        "max_steps": 10_000,
        "thin": 2,
        "warm_up": (200, 150, 150),
        "components": (2, 4, 8),
        "independence_share": 0.5,
    }
    return SamplerSettings(**values | changes)


def ln_prior(x):
    return -0.5 * (x**2).sum(axis=1) - 0.5 * x.shape[1] * np.log(2.0 * np.pi)


class Linear:
    """Measurements y = A x with normal errors: mean, covariance and evidence in closed form."""

    def __init__(self) -> None:
        rng = np.random.default_rng(52)
        self.matrix = rng.normal(size=(6, 4))
        self.sigma = np.array([0.05, 0.1, 0.3, 0.3, 1.0, 1.0])
        self.y = self.matrix @ rng.normal(size=4) + self.sigma * rng.normal(size=6)

    n_dim = 4

    def ln_prob(self, x):
        pull = (x @ self.matrix.T - self.y) / self.sigma
        ln_norm = -np.log(self.sigma).sum() - 3.0 * np.log(2.0 * np.pi)
        return ln_prior(x) - 0.5 * (pull**2).sum(axis=1) + ln_norm

    @property
    def ln_z(self) -> float:
        # y is normal about zero with covariance A A^T + diag(sigma^2).
        covariance = self.matrix @ self.matrix.T + np.diag(self.sigma**2)
        return float(multivariate_normal(np.zeros(6), covariance).logpdf(self.y))

    @property
    def moments(self):
        scaled = self.matrix / self.sigma[:, None]
        covariance = np.linalg.inv(np.eye(4) + scaled.T @ scaled)
        mean = covariance @ scaled.T @ (self.y / self.sigma)
        return mean, np.sqrt(np.diag(covariance))


@dataclass(frozen=True)
class Shell:
    """A sum of exponentials known to 5%: a thin curved shell, like a tight effective optical depth.

    Quadrature runs over the sum's logarithm u, where the likelihood is normal, and all coordinates
    but the last, which follows: dx_last / du = exp(u - x_last).
    """

    value: float = 1.5
    sigma: float = 0.05
    n_dim: int = 3

    def ln_prob(self, x):
        u = logsumexp(x, axis=1)
        ln_norm = -np.log(self.sigma) - 0.5 * np.log(2.0 * np.pi)
        return ln_prior(x) - 0.5 * ((u - self.value) / self.sigma) ** 2 + ln_norm

    def quadrature(self, n: int = 1200):
        """Return evidence, mean and width of the first coordinate."""
        nodes, weights = np.polynomial.hermite_e.hermegauss(9)
        u = self.value + self.sigma * nodes
        x = np.linspace(-7.0, self.value + 0.2, n)
        first, second = np.meshgrid(x, x, indexing="ij")
        density = np.zeros(n)
        for u_k, w_k in zip(u, weights / weights.sum(), strict=True):
            rest = np.exp(u_k) - np.exp(first) - np.exp(second)
            with np.errstate(invalid="ignore", divide="ignore"):
                last = np.log(rest)
            inside = np.isfinite(last)
            third = np.where(inside, last, 0.0)
            points = np.stack([first, second, third], axis=-1).reshape(-1, 3)
            height = np.exp(ln_prior(points).reshape(n, n) + u_k - third)
            density += w_k * np.where(inside, height, 0.0).sum(axis=1)
        step = x[1] - x[0]
        z = density.sum() * step**2
        mean = (density * x).sum() / density.sum()
        width = np.sqrt((density * x**2).sum() / density.sum() - mean**2)
        return z, mean, width
