"""What is believed about one number: its density, its tails, where to integrate it, and how PyMC draws it.

`base.py` says what every distribution can do; the other files hold one family of shapes each. `Truncated`
wraps any of them and is not a name of its own in a study file.
"""

from bayesdesign.prior.base import Distribution as Distribution
from bayesdesign.prior.bounded import Beta as Beta
from bayesdesign.prior.bounded import Histogram as Histogram
from bayesdesign.prior.bounded import Uniform as Uniform
from bayesdesign.prior.location_scale import Cauchy as Cauchy
from bayesdesign.prior.location_scale import Normal as Normal
from bayesdesign.prior.location_scale import StudentT as StudentT
from bayesdesign.prior.mixture import Mixture as Mixture
from bayesdesign.prior.point import Point as Point
from bayesdesign.prior.positive import Exponential as Exponential
from bayesdesign.prior.positive import Gamma as Gamma
from bayesdesign.prior.positive import HalfNormal as HalfNormal
from bayesdesign.prior.positive import Lognormal as Lognormal
from bayesdesign.prior.truncated import Truncated as Truncated

DISTRIBUTIONS: tuple[type[Distribution], ...] = (
    Normal,
    StudentT,
    Cauchy,
    Gamma,
    Lognormal,
    HalfNormal,
    Exponential,
    Uniform,
    Beta,
    Histogram,
    Point,
    Mixture,
)
