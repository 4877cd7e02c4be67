"""Families of designs: what a study can record."""

from bayesdesign.design.base import Design as Design
from bayesdesign.design.estimate import Estimate as Estimate
from bayesdesign.design.means import OneMean as OneMean
from bayesdesign.design.means import PairedMeans as PairedMeans
from bayesdesign.design.one_proportion import OneProportion as OneProportion
from bayesdesign.design.two_means import TwoMeans as TwoMeans
from bayesdesign.design.two_proportions import TwoProportions as TwoProportions

FAMILIES: tuple[type[Design], ...] = (Estimate, OneMean, PairedMeans, TwoMeans, OneProportion, TwoProportions)
