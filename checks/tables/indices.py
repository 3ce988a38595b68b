"""The published table `indices`: a row for each index of each stage, published or withheld."""

from typing import ClassVar

import pandas as pd
import pandera.pandas as pa

from checks.tables.acquisitions import CHAMBERS
from checks.tables.kinds import count, flag, quantity, text

STATUSES = ("published", "withheld")


class Indices(pa.DataFrameModel):
    """An index of a stage: a finite number with its interval, or nothing with a reason."""

    site: str = text("the site")
    subject: str = text("the subject's pseudonym")
    visit: str = text("the visit")
    acquisition: str = text("the acquisition")
    chamber: str = text("the ventricle: LV or RV", among=CHAMBERS)
    stage: str = text("the stage of the study", optional=True)
    run: str = text("the run; null for the value pooled over the stage's runs", optional=True)
    index: str = text("name of the index")
    estimator: str = text("how it was estimated; values of different estimators must never be mixed")
    primary: bool = flag("whether it is the one row to use of its acquisition, stage and index")
    value: float = quantity("the index; null where withheld", None)
    unit: str = text("UCUM unit of value and intervals", optional=True)
    ci_low: float = quantity("lower end of the 95 % interval, fit and calibration uncertainty together", None)
    ci_high: float = quantity("upper end of the 95 % interval, fit and calibration uncertainty together", None)
    fit_ci_low: float = quantity("lower end of the 95 % interval of the fit alone", None)
    fit_ci_high: float = quantity("upper end of the 95 % interval of the fit alone", None)
    beats: pd.Int64Dtype = count("beats that bear the value", optional=True)
    runs: pd.Int64Dtype = count("runs that bear the value", optional=True)
    status: str = text("whether the value is published", among=STATUSES)
    machine_status: str = text("the program's own status", among=STATUSES)
    reason: str = text("why it is withheld, or what to know about it", optional=True)

    class Config:
        """Columns exactly as the contract lists them."""

        name = "indices"
        strict = True
        ordered = True
        metadata: ClassVar = {
            "primary_key": ["acquisition", "stage", "run", "index", "estimator"],
            "foreign_keys": [
                {"fields": ["acquisition"], "table": "acquisitions", "references": ["acquisition"]},
                {"fields": ["acquisition", "run"], "table": "runs", "references": ["acquisition", "run"]},
            ],
        }
