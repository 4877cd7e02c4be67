"""From an outcome to a decision."""

from bayesdesign.rule.base import Rule as Rule
from bayesdesign.rule.significance import Significance as Significance

RULES: tuple[type[Rule], ...] = (Significance,)
