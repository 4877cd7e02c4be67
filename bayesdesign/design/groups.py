"""Sizes of two groups: equal, or a pair whose ratio is kept when n varies."""

import numpy as np

from bayesdesign.core.arrays import FloatArray
from bayesdesign.core.errors import Fault, Invalid, check_values


def check_sizes(n_per_group: int | None, n_treatment: int | None, n_control: int | None, least: int) -> None:
    """Raise `Invalid` unless one of the two ways to give sizes is used, with sizes of at least `least`."""
    pair = (n_treatment is not None, n_control is not None)
    if (n_per_group is not None) == any(pair) or (any(pair) and not all(pair)):
        raise Invalid(
            [
                Fault(
                    where="n_per_group",
                    problem="sizes do not fit",
                    allowed="give n_per_group, or n_treatment and n_control",
                )
            ]
        )
    for key, size in (("n_per_group", n_per_group), ("n_treatment", n_treatment), ("n_control", n_control)):
        check_values((size is None or size >= least, key, size, f"a whole number of at least {least}"))


def group_sizes(
    n: FloatArray, n_treatment: int | None, n_control: int | None, least: int
) -> tuple[FloatArray, FloatArray]:
    """Treated and control sizes at each n. For a pair, n counts the treated and the planned ratio is kept (rounded)."""
    if n_treatment is None or n_control is None:
        return n, n
    # the division comes last: it is exact at the planned size, whatever the ratio
    return n, np.maximum(np.floor(n * n_control / n_treatment + 0.5), least)
