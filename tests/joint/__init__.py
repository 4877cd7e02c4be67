"""Tests of bayesdesign.prior."""
