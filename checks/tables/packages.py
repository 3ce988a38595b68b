"""The published table `packages`: a row for each version of each package a site sent."""

from typing import ClassVar

import pandas as pd
import pandera.pandas as pa

from checks.tables.kinds import count, instant, sha256, text

STATUSES = ("accepted", "queried", "rejected", "quarantined", "waiting", "superseded", "seen again")


class Packages(pa.DataFrameModel):
    """A package version: what arrived, and what became of it."""

    site: str = text("the site whose inbox holds the package; null for what lies outside every site's folder", optional=True)
    package: str = text("the folder the site uploaded; null for a site's folder as a whole", optional=True)
    acquisition: str = text("the acquisition the package names; null where it could not be read", optional=True)
    version: pd.Int64Dtype = count("counts the contents received under this acquisition's name, from 1", optional=True, at_least=1)
    status: str = text("what became of it; seen again stands outside every sum of distinct contents", among=STATUSES)
    reason: str = text("why it stands there, where something is to be said", optional=True)
    received_at: pd.DatetimeTZDtype = instant("modification time of the package's manifest-sha256.txt", optional=True)
    package_sha256: str = sha256("SHA-256 over the payload's sums and names; null while it is incomplete", optional=True)

    class Config:
        """Columns exactly as the contract lists them."""

        name = "packages"
        strict = True
        ordered = True
        metadata: ClassVar = {"primary_key": ["site", "package", "package_sha256"], "foreign_keys": []}
