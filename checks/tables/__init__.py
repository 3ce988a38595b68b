"""Schemas of the published tables, in the order of the contract."""

from checks.tables.acquisitions import Acquisitions
from checks.tables.beats import Beats
from checks.tables.changes import Changes
from checks.tables.indices import Indices
from checks.tables.packages import Packages
from checks.tables.rejections import Rejections
from checks.tables.runs import Runs

ALL = (Packages, Acquisitions, Runs, Beats, Rejections, Indices, Changes)
