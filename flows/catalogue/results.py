"""The tables of the catalogue that hold what an assessment found: the published tables' columns, one set of rows an assessment.

``position`` is a row's place in the assessment's own list. Columns that an entry or the assessment already holds are not held twice.
"""

from datetime import datetime

from sqlalchemy import ForeignKey
from sqlalchemy.orm import Mapped, declared_attr, mapped_column

from flows.catalogue.models import HASH
from flows.catalogue.types import Base


class _OfAssessment:
    """A row that goes with its assessment."""

    @declared_attr
    def assessment_key(self) -> Mapped[str]:
        """Return the column that names the assessment."""
        return mapped_column(HASH, ForeignKey("assessments.key", ondelete="CASCADE"), primary_key=True, sort_order=-4)


class _Listed(_OfAssessment):
    position: Mapped[int] = mapped_column(primary_key=True, autoincrement=False, sort_order=-3)


class _Named:
    site: Mapped[str] = mapped_column(sort_order=-2)
    acquisition: Mapped[str] = mapped_column(sort_order=-1)


class AcquisitionRow(_OfAssessment, _Named, Base):
    """What was found out about the acquisition as a whole."""

    __tablename__ = "acquisitions"

    subject: Mapped[str]
    visit: Mapped[str]
    chamber: Mapped[str]
    recorded_at: Mapped[datetime]
    verdict: Mapped[str]
    machine_verdict: Mapped[str]
    decided_by: Mapped[str | None]
    reasons: Mapped[str | None]
    runs: Mapped[int]
    beats: Mapped[int]
    beats_accepted: Mapped[int]


class RunRow(_Listed, _Named, Base):
    """A run."""

    __tablename__ = "runs"

    run: Mapped[str]
    kind: Mapped[str]
    stage: Mapped[str | None]
    manoeuvre: Mapped[str | None]
    sampling_rate_hz: Mapped[float | None]
    duration_s: Mapped[float | None]
    verdict: Mapped[str]
    machine_verdict: Mapped[str]
    decided_by: Mapped[str | None]
    reasons: Mapped[str | None]
    beats: Mapped[int]
    beats_accepted: Mapped[int]


class BeatRow(_Listed, _Named, Base):
    """A detected beat."""

    __tablename__ = "beats"

    run: Mapped[str]
    beat: Mapped[int]
    start_s: Mapped[float | None]
    end_systole_s: Mapped[float | None]
    end_s: Mapped[float | None]
    verdict: Mapped[str]
    machine_verdict: Mapped[str]
    decided_by: Mapped[str | None]
    reasons: Mapped[str | None]
    in_window: Mapped[bool | None]
    rr_s: Mapped[float | None]
    edv_ml: Mapped[float | None]
    esv_ml: Mapped[float | None]
    sv_ml: Mapped[float | None]
    ef: Mapped[float | None]
    edp_mmhg: Mapped[float | None]
    esp_mmhg: Mapped[float | None]
    pmax_mmhg: Mapped[float | None]
    sw_mmhg_ml: Mapped[float | None]
    ea_mmhg_per_ml: Mapped[float | None]
    dpdt_max_mmhg_per_s: Mapped[float | None]
    dpdt_min_mmhg_per_s: Mapped[float | None]
    tau_ms: Mapped[float | None]


class RejectionRow(_Listed, _Named, Base):
    """A check that did not pass."""

    __tablename__ = "rejections"

    run: Mapped[str | None]
    beat: Mapped[int | None]
    at_s: Mapped[float | None]
    check: Mapped[str]
    verdict: Mapped[str]
    decisive: Mapped[bool]
    value: Mapped[float | None]
    limit: Mapped[float | None]
    unit: Mapped[str | None]
    reason: Mapped[str]
    action: Mapped[str]


class IndexRow(_Listed, _Named, Base):
    """An index of a stage."""

    __tablename__ = "indices"

    subject: Mapped[str]
    visit: Mapped[str]
    chamber: Mapped[str]
    stage: Mapped[str | None]
    run: Mapped[str | None]
    index: Mapped[str]
    estimator: Mapped[str]
    primary: Mapped[bool]
    value: Mapped[float | None]
    unit: Mapped[str | None]
    ci_low: Mapped[float | None]
    ci_high: Mapped[float | None]
    fit_ci_low: Mapped[float | None]
    fit_ci_high: Mapped[float | None]
    beats: Mapped[int | None]
    runs: Mapped[int | None]
    status: Mapped[str]
    machine_status: Mapped[str]
    reason: Mapped[str | None]


class ChangeRow(_Listed, _Named, Base):
    """A difference of an index between two stages."""

    __tablename__ = "changes"

    subject: Mapped[str]
    visit: Mapped[str]
    from_stage: Mapped[str]
    to_stage: Mapped[str]
    index: Mapped[str]
    estimator: Mapped[str]
    part: Mapped[str | None]
    difference: Mapped[float | None]
    unit: Mapped[str | None]
    ci_low: Mapped[float | None]
    ci_high: Mapped[float | None]
    status: Mapped[str]
    reason: Mapped[str | None]


class MeasureRow(_Listed, _Named, Base):
    """Every value a check looked at, passes too: what a change of limits can be previewed on."""

    __tablename__ = "measures"

    run: Mapped[str | None]
    beat: Mapped[int | None]
    check: Mapped[str]
    level: Mapped[str]
    value: Mapped[float | None]
    verdict: Mapped[str]
    limit: Mapped[float | None]
    unit: Mapped[str | None]
    revision: Mapped[int]


class ChannelRow(_Listed, _Named, Base):
    """The sum of a recorded channel's content: by it the same recording is known under another name."""

    __tablename__ = "channels"

    run: Mapped[str]
    channel: Mapped[str]
    sha256: Mapped[str] = mapped_column(HASH)


LISTED = (RunRow, BeatRow, RejectionRow, IndexRow, ChangeRow, MeasureRow, ChannelRow)
"""The tables an assessment fills with lists of rows, parents first."""
