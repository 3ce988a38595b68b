"""Verdicts with reasons from numbers and signals; nothing is changed here."""

from checks import acquisition, beat, run

ALL = (*acquisition.ALL, *run.ALL, *beat.ALL)
