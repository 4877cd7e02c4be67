"""Readings of the joint table: every number the program prints."""

from bayesdesign.measures.ratios import Ratio as Ratio
from bayesdesign.measures.ratios import planning_readings as planning_readings
from bayesdesign.measures.ratios import readings as readings

POWER_LEVELS = (0.05, 0.25, 0.5, 0.75, 0.95)
