"""Foundations: errors, arrays, quadrature and search. Imports nothing of ours."""
