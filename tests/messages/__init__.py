"""Tests of the traps."""
