"""The published table `beats`: a row for each detected beat, accepted or rejected."""

from typing import ClassVar

import pandas as pd
import pandera.pandas as pa

from checks.tables.kinds import count, flag, quantity, text

VERDICTS = ("accepted", "rejected")


class Beats(pa.DataFrameModel):
    """A detected beat, its verdict and its landmarks."""

    site: str = text("the site")
    acquisition: str = text("the acquisition")
    run: str = text("the run")
    beat: int = count("counts the beats of a run from 1", at_least=1)
    start_s: float = quantity("end-diastole, the pressure upstroke, from the run's first sample", "s")
    end_systole_s: float = quantity("end-systole, largest P/(V - V0), from the run's first sample", "s")
    end_s: float = quantity("the next beat's end-diastole, from the run's first sample", "s")
    verdict: str = text("the verdict in force", among=VERDICTS)
    machine_verdict: str = text("the program's own verdict", among=VERDICTS)
    decided_by: str = text("the reviewer whose decision is in force; null where the program's verdict stands", optional=True)
    reasons: str = text("names of failed checks, sorted, joined by semicolons", optional=True)
    in_window: pd.BooleanDtype = flag("whether the beat lies in the window the slopes of a preload run are fitted in", optional=True)
    rr_s: float = quantity("from this beat's R wave to the next", "s")
    edv_ml: float = quantity("volume at end-diastole", "mL")
    esv_ml: float = quantity("smallest volume of ejection", "mL")
    sv_ml: float = quantity("stroke volume, EDV - ESV", "mL")
    ef: float = quantity("ejection fraction, SV/EDV", "1")
    edp_mmhg: float = quantity("pressure at end-diastole", "mm[Hg]")
    esp_mmhg: float = quantity("pressure at end-systole", "mm[Hg]")
    pmax_mmhg: float = quantity("largest pressure", "mm[Hg]")
    sw_mmhg_ml: float = quantity("stroke work, area of the closed loop", "mm[Hg].mL")
    ea_mmhg_per_ml: float = quantity("effective arterial elastance, ESP/SV", "mm[Hg]/mL")
    dpdt_max_mmhg_per_s: float = quantity("largest rate of pressure rise", "mm[Hg]/s")
    dpdt_min_mmhg_per_s: float = quantity("largest rate of pressure fall, negative", "mm[Hg]/s")
    tau_ms: float = quantity("time constant of relaxation after Raff and Glantz", "ms")

    class Config:
        """Columns exactly as the contract lists them."""

        name = "beats"
        strict = True
        ordered = True
        metadata: ClassVar = {
            "primary_key": ["acquisition", "run", "beat"],
            "foreign_keys": [{"fields": ["acquisition", "run"], "table": "runs", "references": ["acquisition", "run"]}],
        }
