"""The published table `runs`: a row for each recording of each current acquisition."""

from typing import ClassVar

import pandera.pandas as pa

from checks.tables.kinds import count, quantity, text

KINDS = ("steady", "preload-reduction", "saline")
VERDICTS = ("usable", "unusable")


class Runs(pa.DataFrameModel):
    """A run: one recording of an acquisition."""

    site: str = text("the site")
    acquisition: str = text("the acquisition")
    run: str = text("the run's name, unique in the acquisition")
    kind: str = text("what was recorded", among=KINDS)
    stage: str = text("the stage of the study", optional=True)
    manoeuvre: str = text("how preload was lowered; never pooled across manoeuvres", optional=True)
    sampling_rate_hz: float = quantity("sampling rate of the pressure channel, else of the volume channel", "Hz", at_least=0.0)
    duration_s: float = quantity("length of the recording", "s", at_least=0.0)
    verdict: str = text("the verdict in force", among=VERDICTS)
    machine_verdict: str = text("the program's own verdict", among=VERDICTS)
    decided_by: str = text("the reviewer whose decision is in force; null where the program's verdict stands", optional=True)
    reasons: str = text("names of failed checks, sorted, joined by semicolons", optional=True)
    beats: int = count("beats detected")
    beats_accepted: int = count("beats accepted")

    class Config:
        """Columns exactly as the contract lists them."""

        name = "runs"
        strict = True
        ordered = True
        metadata: ClassVar = {
            "primary_key": ["acquisition", "run"],
            "foreign_keys": [{"fields": ["acquisition"], "table": "acquisitions", "references": ["acquisition"]}],
        }
