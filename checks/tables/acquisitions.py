"""The published table `acquisitions`: a row for each acquisition in its current version."""

from typing import ClassVar

import pandas as pd
import pandera.pandas as pa

from checks.tables.kinds import count, instant, sha256, text

VERDICTS = ("accepted", "queried", "rejected")
CHAMBERS = ("LV", "RV")


class Acquisitions(pa.DataFrameModel):
    """An acquisition: its verdict, and under which protocol and software it was reached."""

    site: str = text("the site")
    subject: str = text("the subject's pseudonym")
    visit: str = text("the visit, as the protocol names it")
    acquisition: str = text("the acquisition's name, unique in the study")
    version: int = count("which of the contents received under this name the row describes", at_least=1)
    chamber: str = text("the ventricle: LV or RV", among=CHAMBERS)
    recorded_at: pd.DatetimeTZDtype = instant("when the site says it was recorded")
    received_at: pd.DatetimeTZDtype = instant("modification time of the package's manifest-sha256.txt")
    verdict: str = text("the verdict in force", among=VERDICTS)
    machine_verdict: str = text("the program's own verdict", among=VERDICTS)
    decided_by: str = text("the reviewer whose decision is in force; null where the program's verdict stands", optional=True)
    reasons: str = text("names of failed checks, sorted, joined by semicolons", optional=True)
    runs: int = count("runs the package declares")
    beats: int = count("beats detected in them")
    beats_accepted: int = count("beats accepted")
    package_sha256: str = sha256("the content assessed")
    protocol_version: str = text("version of the study protocol")
    protocol_sha256: str = sha256("SHA-256 of the study protocol's file")
    software_version: str = text("version of this software")

    class Config:
        """Columns exactly as the contract lists them."""

        name = "acquisitions"
        strict = True
        ordered = True
        metadata: ClassVar = {
            "primary_key": ["acquisition"],
            "foreign_keys": [{"fields": ["package_sha256"], "table": "packages", "references": ["package_sha256"]}],
        }
