"""Made-up outcomes of an assessment, small and whole: what the program could have found, without any signal."""

from datetime import UTC, datetime

from checks.tables import ALL
from flows.publish.tables import build

BEATS = 4


def built(rows):
    """The seven tables made of rows."""
    names = {model.Config.name: list(model.to_schema().columns) for model in ALL}
    return build({table: {name: [row[name] for row in rows[table]] for name in columns} for table, columns in names.items()})


def found_rows(site="harbour", acquisition="H-1-baseline", *, subject="H-1", visit="baseline", rejected=(3,), verdict="accepted"):
    """Rows of every table but packages, as an assessment hands them over: two runs of four beats, some of them rejected."""
    name = {"site": site, "acquisition": acquisition}
    person = {"site": site, "subject": subject, "visit": visit, "acquisition": acquisition}
    beats = [_beat(name, run, beat, beat not in rejected) for run in ("rest-1", "step-1") for beat in range(1, BEATS + 1)]
    good = sum(beat["verdict"] == "accepted" for beat in beats)
    machine = {"machine_verdict": verdict, "decided_by": None}
    return {
        "acquisition": {
            **person,
            "chamber": "LV",
            "recorded_at": datetime(2026, 3, 4, 8, 12, tzinfo=UTC),
            "verdict": verdict,
            **machine,
            "reasons": "zero-drift" if verdict == "queried" else None,
            "runs": 2,
            "beats": len(beats),
            "beats_accepted": good,
        },
        "runs": [_run(name, run, kind, good // 2) for run, kind in (("rest-1", "steady"), ("step-1", "preload-reduction"))],
        "beats": beats,
        "rejections": [_rejection(name, beat) for beat in beats if beat["verdict"] == "rejected"],
        "indices": [
            _index(person, "EDV", None, 120.5, "mL"),
            _index(person, "EDV", "rest-1", 120.25, "mL"),
            _index(person, "Ees", None, None, "mm[Hg]/mL"),
        ],
        "changes": [],
        "measures": [
            {
                **name,
                "run": beat["run"],
                "beat": beat["beat"],
                "check": "flat-line",
                "level": "beat",
                "value": 0.5 if beat["reasons"] else 0.0,
                "verdict": "fail" if beat["reasons"] else "pass",
                "limit": 0.4 if beat["reasons"] else None,
                "unit": "1",
                "revision": 1,
            }
            for beat in beats
        ],
    }


def package_row(site="harbour", package="up-1", acquisition="H-1-baseline", **values):
    """A row of the published table packages."""
    row = {
        "site": site,
        "package": package,
        "acquisition": acquisition,
        "version": 1,
        "status": "accepted",
        "reason": None,
        "received_at": datetime(2026, 3, 5, 21, 0, 0, 250000, tzinfo=UTC),
        "package_sha256": "a" * 64,
    }
    return row | values


def published_rows(found=None, packages=None):
    """Rows of all seven tables, as the catalogue gives them: one acquisition and its package unless others are given."""
    found = found or found_rows()
    packages = packages or [package_row(status=found["acquisition"]["verdict"])]
    added = {
        "version": 1,
        "received_at": packages[0]["received_at"],
        "package_sha256": packages[0]["package_sha256"],
        "protocol_version": "1",
        "protocol_sha256": "b" * 64,
        "software_version": "0.1.0",
    }
    tables = {name: rows for name, rows in found.items() if name not in {"acquisition", "measures"}}
    return tables | {"packages": packages, "acquisitions": [found["acquisition"] | added]}


def _run(name, run, kind, good):
    return {
        **name,
        "run": run,
        "kind": kind,
        "stage": "rest",
        "manoeuvre": "caval-balloon" if kind == "preload-reduction" else None,
        "sampling_rate_hz": 250.0,
        "duration_s": 4.0,
        "verdict": "usable",
        "machine_verdict": "usable",
        "decided_by": None,
        "reasons": None,
        "beats": BEATS,
        "beats_accepted": good,
    }


def _beat(name, run, beat, is_good):
    verdict = "accepted" if is_good else "rejected"
    landmarks = {"edv_ml": 120.0 + beat, "esv_ml": 50.0, "sv_ml": 70.0 + beat, "ef": 0.1 + 0.2, "edp_mmhg": -1.5, "esp_mmhg": 95.0}
    rest = dict.fromkeys(
        ["pmax_mmhg", "sw_mmhg_ml", "ea_mmhg_per_ml", "dpdt_max_mmhg_per_s", "dpdt_min_mmhg_per_s", "tau_ms", "end_systole_s"],
    )
    return {
        **name,
        "run": run,
        "beat": beat,
        "start_s": float(beat - 1),
        "end_s": float(beat),
        "verdict": verdict,
        "machine_verdict": verdict,
        "decided_by": None,
        "reasons": None if is_good else "flat-line",
        "in_window": run == "step-1",
        "rr_s": 1.0,
        **landmarks,
        **rest,
    }


def _rejection(name, beat):
    return {
        **name,
        "run": beat["run"],
        "beat": beat["beat"],
        "at_s": beat["start_s"],
        "check": "flat-line",
        "verdict": "fail",
        "decisive": True,
        "value": 0.5,
        "limit": 0.4,
        "unit": "1",
        "reason": "pressure stands still for 0.5 s",
        "action": "reject",
    }


def _index(person, index, run, value, unit):
    is_there = value is not None
    return {
        **person,
        "chamber": "LV",
        "stage": "rest",
        "run": run,
        "index": index,
        "estimator": "median",
        "primary": run is None,
        "value": value,
        "unit": unit,
        "ci_low": value - 2.0 if is_there else None,
        "ci_high": value + 2.0 if is_there else None,
        "fit_ci_low": value - 1.0 if is_there else None,
        "fit_ci_high": value + 1.0 if is_there else None,
        "beats": BEATS if is_there else None,
        "runs": 1 if is_there else None,
        "status": "published" if is_there else "withheld",
        "machine_status": "published" if is_there else "withheld",
        "reason": None if is_there else "no preload run with enough beats",
    }
