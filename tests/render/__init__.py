"""Tests of what people and programs read."""
