"""The published table `changes`: a row for each difference of an index between two stages."""

from typing import ClassVar

import pandera.pandas as pa

from checks.tables.indices import STATUSES
from checks.tables.kinds import quantity, text


class Changes(pa.DataFrameModel):
    """An index between two stages: a difference with its interval, or nothing with a reason.

    The rows of one index whose part is not `total` sum to the one whose part is.
    """

    site: str = text("the site")
    subject: str = text("the subject's pseudonym")
    visit: str = text("the visit")
    acquisition: str = text("the acquisition")
    from_stage: str = text("the stage of reference, from which the difference is counted")
    to_stage: str = text("the stage compared with it")
    index: str = text("name of the index")
    estimator: str = text("how it was estimated, the same in both stages")
    part: str = text(
        "what of the difference the row holds: total, or the share of Ees, V0 (together: contractility), Ea or EDV by the box model, "
        "or model-residual, what the box leaves of it; the shares and the residual sum to the total"
    )
    difference: float = quantity("value at to_stage minus value at from_stage; null where withheld", None)
    unit: str = text("UCUM unit of difference and interval", optional=True)
    ci_low: float = quantity("lower end of the 95 % interval", None)
    ci_high: float = quantity("upper end of the 95 % interval", None)
    status: str = text("whether the difference is published", among=STATUSES)
    reason: str = text("why it is withheld, or what to know about it", optional=True)

    class Config:
        """Columns exactly as the contract lists them."""

        name = "changes"
        strict = True
        ordered = True
        metadata: ClassVar = {
            "primary_key": ["acquisition", "from_stage", "to_stage", "index", "estimator", "part"],
            "foreign_keys": [{"fields": ["acquisition"], "table": "acquisitions", "references": ["acquisition"]}],
        }
