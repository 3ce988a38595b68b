"""Coupling indices: one file an index, or a family that shares one fit."""
