"""Tests of the edge: files in, studies or faults out."""
