"""Distributions that PyMC knows under one name."""

import abc
from typing import Any

import numpy as np

from bayesdesign.prior.base import Distribution


class Plain(Distribution):
    """A distribution that is exactly one PyMC distribution; only `law` is left to say."""

    @abc.abstractmethod
    def law(self, pm: Any) -> tuple[Any, dict[str, float]]:
        """PyMC's class and its parameters."""

    def unnamed(self, pm: Any) -> Any:
        """PyMC's distribution outside any model."""
        law, parameters = self.law(pm)
        return law.dist(**_double(parameters))

    def random_variable(self, pm: Any, name: str, shape: tuple[int, ...]) -> Any:
        """See `Distribution.random_variable`."""
        law, parameters = self.law(pm)
        return law(name, **_double(parameters), shape=shape)

    def log_density(self, pm: Any, x: Any) -> Any:
        """See `Distribution.log_density`."""
        return pm.logp(self.unnamed(pm), x)


def _double(parameters: dict[str, float]) -> dict[str, np.float64]:
    # PyTensor keeps a Python 30.0 in single precision, then also its log-gamma: 3e-7 off for a t with 30 df.
    return {key: np.float64(value) for key, value in parameters.items()}
