"""Verdicts with reasons from numbers and signals; nothing is changed here."""
