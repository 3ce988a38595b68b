"""Readers of signal files, one file a format; all of them stand in READERS, and `flows.sources.read` picks by the file's name."""

from flows.sources import csv_file

READERS = (csv_file.READER,)
