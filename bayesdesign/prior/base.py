"""What every distribution of the study file can do; all belief about one number."""

import abc
from typing import Any, ClassVar

import numpy as np

from bayesdesign.core.arrays import FloatArray


class Distribution(abc.ABC):
    """Belief about one number, in the number's own unit.

    Subclasses are frozen keyword-only dataclasses whose fields are the keys of the study file and whose
    `kind` is the value of its `distribution` key. Array methods broadcast and keep the shape of their
    argument.
    """

    kind: ClassVar[str]

    @abc.abstractmethod
    def pdf(self, x: FloatArray) -> FloatArray:
        """Density of the continuous part (it integrates to 1 minus the mass of atoms); 0 off the support."""

    @abc.abstractmethod
    def cdf(self, x: FloatArray) -> FloatArray:
        """Pr(value <= x), atoms included."""

    @abc.abstractmethod
    def sf(self, x: FloatArray) -> FloatArray:
        """Pr(value > x), accurate in the upper tail."""

    @abc.abstractmethod
    def ppf(self, p: FloatArray) -> FloatArray:
        """Smallest x with cdf(x) >= p."""

    @property
    @abc.abstractmethod
    def support(self) -> tuple[float, float]:
        """Smallest closed interval that holds all the mass; ends may be infinite."""

    @abc.abstractmethod
    def breaks(self) -> FloatArray:
        """Sorted finite points between which the density is smooth enough for one Gauss panel.

        First and last leave less than about 1e-16 of the mass outside; every kink, jump and edge of the
        density is among them; near an infinite density or in a power tail they are spaced geometrically.
        Where the density is infinite at an end other than 0 more is left outside, all of it within 1e-9 of
        the last break, because floats there are too coarse. Empty if all mass is in atoms.
        """

    def atoms(self) -> tuple[FloatArray, FloatArray]:
        """Values and masses of the point masses."""
        return np.empty(0), np.empty(0)

    @abc.abstractmethod
    def expectation(self) -> float:
        """Expectation (not called `mean`, which is a field of some); NaN when it does not exist."""

    @abc.abstractmethod
    def deviation(self) -> float:
        """Standard deviation; infinite or NaN when it does not exist."""

    @abc.abstractmethod
    def describe(self) -> str:
        """A few plain words for a report, e.g. `normal, mean 1.8, sd 1.5`."""

    @abc.abstractmethod
    def random_variable(self, pm: Any, name: str, shape: tuple[int, ...]) -> Any:
        """Independent draws as a named variable of the PyMC model in context, for forward simulation.

        `pm` is the pymc module, handed in so that this package never imports it. Built from PyMC's own
        distributions, not from `ppf`, so that the sampling route can contradict the integration route.
        """

    @abc.abstractmethod
    def log_density(self, pm: Any, x: Any) -> Any:
        """Symbolic log density of a continuous distribution at the PyTensor variable `x`, for NUTS."""
