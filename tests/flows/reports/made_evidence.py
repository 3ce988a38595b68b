"""Made-up evidence: loops from simple formulas, faults put in by hand, so that a page's every part has something to show."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np

from flows.reports.views import AcquisitionRow, AcquisitionView, ExpectedRow, GateRow, NightView, PackageRow, ReasonRow, SiteCount

Evidence = dict[str, Any]
SAMPLES = 48
TITLES = {
    "loop-closure": "Loop closure",
    "cycle-length": "Cycle length",
    "post-premature": "Beat after a premature one",
    "missing-samples": "Missing samples",
    "flat-line": "Flat line",
    "range-edv": "Plausible end-diastolic volume",
    "range-dpdt-max": "Plausible dP/dt max",
    "range-ejection-fraction": "Plausible ejection fraction",
    "zero-drift": "Drift of the pressure zero",
    "pressure-zero": "Zero readings of the pressure",
    "preload-beats": "Beats of the preload run",
    "preload-adequacy": "Depth of the preload run",
    "beats-found": "Beats found",
    "pressure-clipping": "Clipped pressure",
    "volume-gain-known": "Gain of the volume",
    "time-gaps": "Gaps in time",
}
OFFSET_REACHES = ["EDP", "ESP", "Pmax", "Ea", "Ees_Ea", "V0", "V100", "V120", "PVA", "PE", "efficiency", "PWRmax"]


def loop(
    edv_ml: float, esv_ml: float, pmax_mmhg: float, edp_mmhg: float = 9.0, end_ml: float | None = None
) -> dict[str, list[float | None]]:
    """A left ventricular loop of 48 points: contraction, ejection, relaxation, filling; it ends at ``end_ml``."""
    share = np.linspace(0, 1, SAMPLES)
    ejected = np.clip((share - 0.08) / 0.30, 0, 1)
    filled = np.clip((share - 0.50) / 0.50, 0, 1)
    volume = edv_ml - (edv_ml - esv_ml) * 0.5 * (1 - np.cos(np.pi * ejected))
    volume = volume + ((edv_ml if end_ml is None else end_ml) - esv_ml) * filled**0.7
    rise = np.clip(share / 0.08, 0, 1)
    pressure = (
        edp_mmhg + (0.72 * pmax_mmhg - edp_mmhg) * 0.5 * (1 - np.cos(np.pi * rise)) + 0.28 * pmax_mmhg * np.sin(np.pi * ejected * 0.8)
    )
    relaxed = np.clip((share - 0.38) / 0.12, 0, 1)
    pressure = np.where(share > 0.38, 3 + (pressure - 3) * np.exp(-5 * relaxed), pressure) + (edp_mmhg - 3) * filled**2
    return {"volume_ml": [round(float(v), 2) for v in volume], "pressure_mmhg": [round(float(p), 2) for p in pressure]}


def rv_loop(edv_ml: float, esv_ml: float, pmax_mmhg: float) -> dict[str, list[float | None]]:
    """A triangular loop, as the right ventricle has it."""
    phase = np.linspace(0, 2 * np.pi, SAMPLES)
    volume = (edv_ml + esv_ml) / 2 + (edv_ml - esv_ml) / 2 * np.cos(phase)
    pressure = 4 + (pmax_mmhg - 4) * np.clip(np.sin(phase + 0.45), 0, 1) ** 0.8
    return {"volume_ml": [round(float(v), 2) for v in volume], "pressure_mmhg": [round(float(p), 2) for p in pressure]}


def make_run(
    run: str,
    count: int,
    *,
    kind: str = "steady",
    stage: str = "baseline",
    chamber: str = "LV",
    rejected: dict[int, str] | None = None,
    fall: float = 0.0,
    window: range | None = None,
    seed: int = 1,
) -> Evidence:
    """A run of ``count`` beats; ``rejected`` maps a beat to the checks that rejected it; ``fall`` is the share EDV loses in the window."""
    random = np.random.default_rng(seed)
    rejected = rejected or {}
    beats, loops, start_s = [], [], 0.31
    for beat in range(1, count + 1):
        depth = (window.index(beat) / max(len(window) - 1, 1)) if window and beat in window else 0.0
        if window and beat > window[-1]:
            depth = max(1 - (beat - window[-1]) / 5, 0)
        edv = 132 * (1 - fall * depth) + float(random.normal(0, 1.3))
        esv, pmax = (
            52 * (1 - 0.7 * fall * depth) + float(random.normal(0, 0.9)),
            118 * (1 - 0.9 * fall * depth) + float(random.normal(0, 1.4)),
        )
        rr = 0.86 + float(random.normal(0, 0.012))
        checks = rejected.get(beat, "")
        shape = loop(edv, esv, pmax) if chamber == "LV" else rv_loop(edv, esv, 28)
        if "cycle-length" in rejected.get(beat + 1, ""):
            rr *= 0.62
        if "cycle-length" in checks:
            rr, edv = rr * 1.35, edv * 0.8
            shape = loop(edv, esv * 1.05, pmax * 0.72)
        if "loop-closure" in checks:
            shape = loop(edv, esv, pmax, end_ml=edv - 21)
        if "missing-samples" in checks:
            shape = {key: [None if 12 <= index < 22 else value for index, value in enumerate(values)] for key, values in shape.items()}
        if "flat-line" in checks:
            shape["pressure_mmhg"][8:30] = [96.0] * 22
        if "range-edv" in checks:
            edv = 262.0
            shape = loop(edv, esv, pmax)
        beats.append(
            {
                "beat": beat,
                "start_s": round(start_s, 3),
                "end_s": round(start_s + rr, 3),
                "verdict": "rejected" if checks else "accepted",
                "reasons": checks,
                "in_window": bool(window and beat in window),
                "edv_ml": edv,
                "esv_ml": esv,
                "sv_ml": edv - esv,
                "edp_mmhg": 9.0,
                "esp_mmhg": pmax * 0.93,
                "pmax_mmhg": pmax,
                "sw_mmhg_ml": (edv - esv) * pmax * 0.85,
                "dpdt_max_mmhg_per_s": 1480.0,
                "rr_s": rr,
            }
        )
        loops.append({"beat": beat, **shape})
        start_s += rr
    if count > 160:
        loops = [item for item in loops if item["beat"] in rejected or item["beat"] % 9 == 0]
    template = loop(132, 52, 118) if chamber == "LV" else rv_loop(132, 52, 28)
    times = np.linspace(0, start_s, 1500)
    points = [(item["esv_ml"], item["esp_mmhg"], item["beat"]) for item in beats if item["in_window"] and item["verdict"] == "accepted"]
    return {
        "run": run,
        "kind": kind,
        "stage": stage,
        "manoeuvre": "caval-balloon" if kind == "preload-reduction" else None,
        "verdict": "usable",
        "reasons": "",
        "sampling_rate_hz": 250.0,
        "duration_s": round(start_s + 0.2, 2),
        "detector": "upstroke",
        "trace": {
            "time_s": [round(float(t), 3) for t in times],
            "pressure_mmhg": [round(float(60 + 55 * np.sin(2 * np.pi * t / 0.86)), 1) for t in times],
            "volume_ml": [round(float(92 + 40 * np.cos(2 * np.pi * t / 0.86)), 1) for t in times],
        },
        "beats": beats,
        "loops": loops,
        "template": template,
        "line": {
            "ees_mmhg_per_ml": 2.31,
            "v0_ml": 6.4,
            "volume_ml": [volume for volume, _, _ in points],
            "pressure_mmhg": [2.31 * (volume - 6.4) + float(random.normal(0, 1.5)) for volume, _, _ in points],
            "beat": [beat for _, _, beat in points],
        }
        if points
        else None,
        "window_s": [beats[window[0] - 1]["start_s"], beats[window[-1] - 1]["end_s"]] if window else None,
    }


def unreadable_run(run: str = "rest-9") -> Evidence:
    return {
        "run": run,
        "kind": "steady",
        "stage": "baseline",
        "manoeuvre": None,
        "verdict": "unusable",
        "reasons": "readable",
        "sampling_rate_hz": None,
        "duration_s": None,
        "detector": None,
        "trace": {"time_s": [], "pressure_mmhg": [], "volume_ml": []},
        "beats": [],
        "loops": [],
        "template": None,
        "line": None,
        "window_s": None,
    }


def finding(check: str, run: str | None, beats: list[int], reason: str, **more: object) -> Evidence:
    level = more.pop("level", "beat" if beats else "run" if run else "acquisition")
    base: Evidence = {
        "check": check,
        "title": TITLES.get(check),
        "level": level,
        "run": run,
        "beats": beats,
        "verdict": "fail",
        "action": "reject" if level == "beat" else "withhold",
        "value": None,
        "limit": None,
        "unit": "1",
        "reason": reason,
        "remedy": "",
        "at_s": None,
        "count": len(beats) or 1,
        "spoils": [],
    }
    return base | more


def index_rows(acquisition: str, withheld: dict[str, str] | None = None, stage: str = "baseline") -> list[Evidence]:
    """A row an index; ``withheld`` maps an index to why."""
    values = {
        "HR": (69.8, "/min"),
        "CO": (5.58, "L/min"),
        "EDV": (131.9, "mL"),
        "ESV": (52.2, "mL"),
        "SV": (79.7, "mL"),
        "EF": (0.604, "1"),
        "EDP": (9.1, "mm[Hg]"),
        "ESP": (109.6, "mm[Hg]"),
        "Pmax": (118.3, "mm[Hg]"),
        "Ea": (1.375, "mm[Hg]/mL"),
        "SW": (8012.0, "mm[Hg].mL"),
        "dPdt_max": (1480.0, "mm[Hg]/s"),
        "tau": (41.3, "ms"),
        "Ees": (2.31, "mm[Hg]/mL"),
        "V0": (6.4, "mL"),
        "V100": (49.7, "mL"),
        "Ees_Ea": (1.68, "1"),
        "PRSW": (71.2, "mm[Hg]"),
        "PVA": (11032.0, "mm[Hg].mL"),
        "efficiency": (0.726, "1"),
    }
    rows = []
    for place, (index, (value, unit)) in enumerate(values.items()):
        why = (withheld or {}).get(index)
        half = value * (0.03 + 0.019 * (place % 9)) if index != "V0" else 9.8
        rows.append(
            {
                "site": "harbour",
                "subject": "H-014",
                "visit": "baseline",
                "acquisition": acquisition,
                "chamber": "LV",
                "stage": stage,
                "run": None,
                "index": index,
                "estimator": "multi-beat:orthogonal" if index in {"Ees", "V0", "V100", "PRSW"} else "median",
                "primary": True,
                "value": None if why else value,
                "unit": unit,
                "ci_low": None if why else value - half * 1.1,
                "ci_high": None if why else value + half,
                "fit_ci_low": None if why else value - half * 0.5,
                "fit_ci_high": None if why else value + half * 0.5,
                "beats": 57,
                "runs": 2,
                "status": "withheld" if why else "published",
                "machine_status": "withheld" if why else "published",
                "reason": why,
            }
        )
    rows.append(
        rows[13]
        | {"run": "occlusion-1", "primary": False, "value": 2.24, "ci_low": 1.9, "ci_high": 2.7, "status": "published", "reason": None}
    )
    return rows


def make_view(
    acquisition: str,
    verdict: str,
    runs: list[Evidence],
    findings: list[Evidence],
    *,
    withheld: dict[str, str] | None = None,
    chamber: str = "LV",
    site: str = "harbour",
    indices: bool = True,
) -> AcquisitionView:
    beats = [beat for run in runs for beat in run["beats"]]
    row = {
        "site": site,
        "subject": acquisition[:5],
        "visit": "baseline",
        "acquisition": acquisition,
        "version": 1,
        "chamber": chamber,
        "recorded_at": datetime(2026, 3, 4, 8, 12, tzinfo=UTC),
        "received_at": datetime(2026, 3, 4, 19, 3, tzinfo=UTC),
        "verdict": verdict,
        "machine_verdict": verdict,
        "decided_by": None,
        "reasons": ";".join(sorted({f["check"] for f in findings if f["verdict"] == "fail"})),
        "runs": len(runs),
        "beats": len(beats),
        "beats_accepted": sum(beat["verdict"] == "accepted" for beat in beats),
        "package_sha256": "5f2c8d" * 10 + "77aa",
        "protocol_version": "1",
        "protocol_sha256": "c0ffee" * 10 + "beef",
        "software_version": "0.1.0",
    }
    evidence = {
        "acquisition": {
            "site": site,
            "subject": row["subject"],
            "visit": "baseline",
            "acquisition": acquisition,
            "chamber": chamber,
            "recorded_at": "2026-03-04T08:12:00+00:00",
            "calibration": [
                ["Pressure sensor", "tip manometer P-77"],
                ["Zero before", "0.2 mmHg at 07:55 UTC"],
                ["Zero after", "6.9 mmHg at 09:05 UTC"],
                ["Pressure gain", "1.005 from two points"],
                ["Volume", "conductance, saline: alpha 0.82, alpha x Vc 48 mL"],
                ["Reference", "CMR: EDV 140 mL, ESV 65 mL, SV 75 mL"],
            ],
        },
        "runs": runs,
        "findings": findings,
        "indices": [],
    }
    return AcquisitionView(evidence, row, indices=index_rows(acquisition, withheld) if indices else [])


def clean() -> AcquisitionView:
    runs = [
        make_run("rest-1", 36),
        make_run("occlusion-1", 30, kind="preload-reduction", fall=0.38, window=range(9, 21), seed=3),
        make_run("occlusion-2", 28, kind="preload-reduction", fall=0.33, window=range(8, 20), seed=4),
    ]
    return make_view("H-003-baseline", "accepted", runs, [])


def right() -> AcquisitionView:
    runs = [make_run("rest-1", 41, chamber="RV", rejected={17: "range-edv"}, seed=8)]
    found = finding(
        "range-edv",
        "rest-1",
        [17],
        "end-diastolic volume 262 mL is outside what a heart of this size can hold",
        value=262.0,
        limit=240.0,
        unit="mL",
    )
    return make_view("M-021-baseline-rv", "accepted", runs, [found], chamber="RV", site="mill")


def queried() -> AcquisitionView:
    """Many rejections of many kinds, a drifted zero, a run that cannot be used."""
    lost = {
        5: "cycle-length",
        6: "post-premature",
        21: "cycle-length",
        22: "post-premature",
        30: "loop-closure",
        33: "missing-samples",
        34: "flat-line",
    }
    lost |= dict.fromkeys(range(47, 53), "loop-closure")
    runs = [
        make_run("rest-1", 64, rejected=lost, seed=5),
        make_run(
            "occlusion-1",
            34,
            kind="preload-reduction",
            fall=0.38,
            window=range(10, 24),
            rejected={14: "cycle-length", 15: "post-premature"},
            seed=6,
        ),
        make_run("occlusion-2", 22, kind="preload-reduction", fall=0.07, window=range(9, 12), seed=7),
        unreadable_run(),
    ]
    findings = [
        finding(
            "zero-drift",
            None,
            [],
            "the zero of the pressure moved by 6.7 mmHg between the two readings",
            value=6.7,
            limit=5.0,
            unit="mm[Hg]",
            limits={"suspect_above": 2.0, "fail_above": 5.0},
            spoils=OFFSET_REACHES,
            remedy="say whether the transducer was moved or zeroed again between 07:55 and 09:05",
        ),
        finding(
            "readable",
            "rest-9",
            [],
            "column p_lv holds text in row 118",
            level="run",
            action="query",
            remedy="export the run again with a decimal point",
        ),
        finding(
            "preload-beats",
            "occlusion-2",
            [],
            "only 3 accepted beats lie in the window",
            value=3.0,
            limit=8.0,
            unit="1",
            spoils=["Ees", "V0", "PRSW"],
            limits={"fail_below": 8.0},
            remedy="repeat the manoeuvre if the visit is not over",
        ),
        finding(
            "loop-closure",
            "rest-1",
            [30, 47, 48, 49, 50, 51, 52],
            "the loop ends 26 % of stroke volume from where it began",
            value=0.263,
            limit=0.15,
            limits={"suspect_above": 0.08, "fail_above": 0.15},
            remedy="look at the position of the catheter from second 40 on",
        ),
        finding(
            "cycle-length",
            "rest-1",
            [5, 21],
            "the beat came after 62 % of the usual cycle and is weak for its filling",
            value=0.62,
            limit=0.8,
            limits={"suspect_below": 0.8, "fail_below": 0.8},
        ),
        finding(
            "cycle-length",
            "occlusion-1",
            [14],
            "the beat came after 61 % of the usual cycle and is weak for its filling",
            value=0.61,
            limit=0.8,
        ),
        finding("post-premature", "rest-1", [6, 22], "the beat follows a premature one", level="beat"),
        finding("post-premature", "occlusion-1", [15], "the beat follows a premature one", level="beat"),
        finding(
            "missing-samples",
            "rest-1",
            [33],
            "21 % of the samples are missing",
            value=0.208,
            limit=0.02,
            limits={"fail_above": 0.02, "suspect_above": 0.005},
        ),
        finding("flat-line", "rest-1", [34], "the pressure stands still for 0.39 of the cycle", value=0.46, limit=0.4),
        finding(
            "range-dpdt-max",
            "rest-1",
            [12, 13],
            "dP/dt max 1480 mmHg/s is low for this chamber",
            verdict="suspect",
            action="none",
            value=1480.0,
            limit=1500.0,
            unit="mm[Hg]/s",
        ),
        finding(
            "range-ejection-fraction",
            "rest-1",
            [40],
            "ejection fraction 0.61 lies near the upper limit",
            verdict="suspect",
            action="none",
            value=0.61,
            limit=0.6,
        ),
        finding(
            "pressure-clipping",
            "rest-1",
            [],
            "the top of the pressure recurs flat in 2 beats",
            verdict="suspect",
            action="query",
            value=2.0,
            limit=1.0,
            remedy="check the range of the amplifier",
        ),
    ]
    withheld = dict.fromkeys(OFFSET_REACHES, "zero-drift: the zero of the pressure moved by 6.7 mmHg between the two readings")
    withheld["CO"] = "heart rate of the manifest is missing"
    return make_view("H-014-baseline", "queried", runs, findings, withheld=withheld)


def rejected() -> AcquisitionView:
    run = make_run("rest-1", 2, seed=9)
    run |= {"beats": [], "loops": [], "template": None, "verdict": "unusable", "reasons": "beats-found"}
    found = [
        finding(
            "beats-found",
            "rest-1",
            [],
            "fewer than three beats could be found",
            value=2.0,
            limit=3.0,
            spoils=["Ees"],
            limits={"fail_below": 3.0},
            remedy="check that the pressure channel is the ventricle's",
        ),
        finding(
            "pressure-zero",
            None,
            [],
            "no zero reading of the pressure is given: its offset is unknown",
            spoils=OFFSET_REACHES,
            remedy="send the zero readings of the day",
        ),
    ]
    return make_view("F-002-baseline", "rejected", [run, unreadable_run("rest-2")], found, site="fell", indices=False)


def long() -> AcquisitionView:
    """A run of 700 beats of an irregular heart."""
    lost = (
        dict.fromkeys(range(15, 700, 23), "cycle-length")
        | dict.fromkeys(range(16, 700, 23), "post-premature")
        | dict.fromkeys(range(401, 431), "loop-closure")
    )
    run = make_run("rest-1", 700, rejected=lost, seed=11)
    found = [
        finding(
            "loop-closure",
            "rest-1",
            list(range(401, 431)),
            "the loop ends 26 % of stroke volume from where it began",
            value=0.26,
            limit=0.15,
        ),
        finding(
            "cycle-length", "rest-1", [b for b, c in lost.items() if c == "cycle-length"], "the beat came early", value=0.62, limit=0.8
        ),
        finding("post-premature", "rest-1", [b for b, c in lost.items() if c == "post-premature"], "the beat follows a premature one"),
    ]
    return make_view("H-020-baseline", "accepted", [run], found)


HOSTILE = '<script>alert("x")</script>\'"&\u202eevil\x07{{ 7 * 7 }}'


def hostile() -> AcquisitionView:
    """Every text a site can choose is an attack."""
    run = make_run("rest-1", 5, rejected={2: "loop-closure"})
    run |= {"stage": HOSTILE, "manoeuvre": HOSTILE, "run": HOSTILE}
    found = [finding("loop-closure", HOSTILE, [2], HOSTILE, remedy=HOSTILE, title=HOSTILE, value=0.3, limit=0.15)]
    view = make_view("X-001-baseline", "queried", [run], found, withheld={"EDP": HOSTILE})
    view.evidence["acquisition"]["calibration"].append([HOSTILE, HOSTILE])
    return view


def empty() -> AcquisitionView:
    """As little as an evidence can hold."""
    return make_view("E-001-baseline", "rejected", [unreadable_run()], [], indices=False)


def make_night(views: list[AcquisitionView], **more: Any) -> NightView:
    rows = []
    for view in views:
        row, indices = view.row, view.indices
        rows.append(
            AcquisitionRow(
                row["site"],
                row["subject"],
                row["visit"],
                row["acquisition"],
                row["verdict"],
                tuple(filter(None, row["reasons"].split(";"))),
                row["beats"],
                row["beats_accepted"],
                row["chamber"],
                sum(i["primary"] and i["status"] == "published" for i in indices),
                sum(i["primary"] and i["status"] == "withheld" for i in indices),
            )
        )
    sites = []
    for site in sorted({row.site for row in rows} | {"harbour", "mill", "fell", "ness"}):
        verdicts = [row.verdict for row in rows if row.site == site]
        extra = {"harbour": (1, 0, 1, 2), "mill": (1, 1, 0, 0), "fell": (0, 0, 0, 0), "ness": (0, 0, 0, 1)}.get(site, (0, 0, 0, 0))
        sites.append(SiteCount(site, *(verdicts.count(v) for v in ("accepted", "queried", "rejected")), *extra))
    evening = datetime(2026, 3, 4, 19, 3, tzinfo=UTC)
    packages = [
        PackageRow(
            "harbour",
            "H-015-baseline",
            "H-015-baseline",
            1,
            "quarantined",
            "rest-1.csv: the file is listed but its content differs from the manifest; send the file again",
            evening,
        ),
        PackageRow(
            "mill",
            "upload-7",
            "H-014-baseline",
            1,
            "quarantined",
            "the acquisition name H-014-baseline is already taken by site harbour",
            evening + timedelta(hours=2),
        ),
        PackageRow("mill", "M-030-baseline", "M-030-baseline", None, "waiting", "no manifest yet; the newest file is 3 h old", None),
        PackageRow(
            "harbour", "H-014-baseline-old", "H-014-baseline", 1, "superseded", "version 2 of the same acquisition is current", evening
        ),
        PackageRow("harbour", "copy-of-H-003", "H-003-baseline", 1, "seen again", None, evening),
    ]
    visits = ("baseline", "3 months", "6 months")
    expected = [
        ExpectedRow(
            site,
            f"{letter}-{number:03d}",
            visit,
            received=(number + place) % 4 != 0,
            what="" if (number + place) % 4 else "nothing came yet",
        )
        for site, letter, numbers in (("harbour", "H", (3, 14, 20)), ("mill", "M", (21, 30)), ("ness", "N", (1, 2)))
        for number in numbers
        for place, visit in enumerate(visits)
    ] + [ExpectedRow("fell", "F-002", "baseline", received=True, what="rejected")]
    reasons = [
        ReasonRow("zero-drift", "Drift of the pressure zero", "acquisition", 1, 4, 0, 12),
        ReasonRow("loop-closure", "Loop closure", "beat", 2, 2, 37, 0),
        ReasonRow("cycle-length", "Cycle length", "beat", 2, 3, 33, 0),
        ReasonRow("beats-found", "Beats found", "run", 1, 1, 0, 0),
    ]
    gate = [
        GateRow("beats", "end-diastolic volume lies between 0 and 2000 mL wherever it is given", kept=True, rows=942, failing=0),
        GateRow("acquisitions", "every acquisition is named once", kept=True, rows=5, failing=0),
    ]
    base: dict[str, Any] = {
        "release": "r-8c1f20ab",
        "study": "tarn",
        "protocol_version": "1",
        "protocol_sha256": "c0ffee" * 10 + "beef",
        "software_version": "0.1.0",
        "received": sum(site.total for site in sites),
        "sites": sites,
        "packages": packages,
        "expected": expected,
        "reasons": reasons,
        "acquisitions": rows,
        "gate": gate,
    }
    return NightView(**(base | more))
