"""The published table `rejections`: a row for each check that did not pass."""

from typing import ClassVar

import pandas as pd
import pandera.pandas as pa

from checks.tables.kinds import count, flag, quantity, text

VERDICTS = ("suspect", "fail", "not evaluated")
ACTIONS = ("reject", "withhold", "correct", "query", "none")


class Rejections(pa.DataFrameModel):
    """A check that did not pass, on an acquisition (run and beat null), a run (beat null) or a beat."""

    site: str = text("the site")
    acquisition: str = text("the acquisition")
    run: str = text("the run; null where the check looks at the acquisition", optional=True)
    beat: pd.Int64Dtype = count("the beat; null above beat level", optional=True, at_least=1)
    at_s: float = quantity("where it stands, from the run's first sample", "s")
    check: str = text("name of the check")
    verdict: str = text("what the check says", among=VERDICTS)
    decisive: bool = flag("whether it changed anything; false for suspect and not evaluated rows that did not")
    value: float = quantity("what was measured; null for facts and where nothing could be measured", None)
    limit: float = quantity("the bound crossed; null for facts", None)
    unit: str = text("UCUM unit of value and limit", optional=True)
    reason: str = text("the reason as a sentence")
    action: str = text("what followed", among=ACTIONS)

    class Config:
        """Columns exactly as the contract lists them."""

        name = "rejections"
        strict = True
        ordered = True
        metadata: ClassVar = {
            "primary_key": ["acquisition", "run", "beat", "check"],
            "foreign_keys": [
                {"fields": ["acquisition"], "table": "acquisitions", "references": ["acquisition"]},
                {"fields": ["acquisition", "run"], "table": "runs", "references": ["acquisition", "run"]},
                {"fields": ["acquisition", "run", "beat"], "table": "beats", "references": ["acquisition", "run", "beat"]},
            ],
        }
