"""A manifest that says everything the contract lets it say, and the smallest protocol."""

import copy
import json

import pytest

from flows.study.manifest import read_manifest

SMALLEST_PROTOCOL = '[study]\nname = "tarn"\nversion = "1"\n[sites.harbour]\ntimezone = "Europe/Lisbon"\n'

FULL = {
    "format": 1,
    "study": "tarn",
    "site": "harbour",
    "subject": "H-014",
    "visit": "baseline",
    "acquisition": "H-014-baseline",
    "recorded_at": "2026-03-04T09:12:00+01:00",
    "chamber": "LV",
    "session": "H-014-1",
    "rhythm": "sinus",
    "subject_facts": {"bsa_m2": 1.9, "conditions": ["mitral-regurgitation"]},
    "sensors": {
        "pressure": {"kind": "tip-manometer", "serial": "P-77"},
        "volume": {"kind": "conductance", "serial": "C-12", "electrode_spacing_cm": 1.2, "blood_resistivity_ohm_cm": 150},
    },
    "calibration": {
        "pressure": {
            "zero_before": {"at": "2026-03-04T08:55:00+01:00", "mmhg": 0.2},
            "zero_after": {"at": "2026-03-04T10:05:00+01:00", "mmhg": 1.1},
            "zeros": [{"at": "2026-03-04T09:30:00+01:00", "mmhg": 0.6}],
            "zero_sd_mmhg": 0.3,
            "points": [{"applied_mmhg": 0, "read_mmhg": 0.1}, {"applied_mmhg": 100, "read_mmhg": 100.6}],
        },
        "volume": {
            "method": "saline",
            "alpha": 0.82,
            "alpha_sd": 0.03,
            "alpha_vc_ml": 48.0,
            "alpha_vc_sd_ml": 3.0,
            "at": "2026-03-04T09:05:00+01:00",
            "reference": {"source": "CMR", "edv_ml": 140, "esv_ml": 65, "sv_ml": 75, "sv_sd_ml": 4},
        },
    },
    "runs": [
        {
            "run": "rest-1",
            "kind": "steady",
            "stage": "baseline",
            "file": "rest-1.csv",
            "sampling_rate_hz": 250,
            "started_at": "2026-03-04T09:20:00+01:00",
            "ended_at": "2026-03-04T09:20:32+01:00",
            "heart_rate_per_min": 70,
            "respiration": "held",
            "events": [{"at_s": 8.0, "kind": "occlusion-on"}],
            "channels": {
                "time": {"column": "t", "unit": "s"},
                "pressure": {"column": "p_lv", "unit": "mm[Hg]", "delay_ms": 0},
                "volume": {"column": "v_lv", "unit": "mL", "calibrated": True},
                "ecg": {"column": "ecg", "unit": "mV"},
            },
        },
    ],
}


@pytest.fixture
def declared():
    """Return the full declaration, free to be changed."""
    return copy.deepcopy(FULL)


@pytest.fixture
def read():
    """Return a function that reads a declaration, or bytes, as a Manifest."""

    def read_one(declaration, **options):
        text = declaration if isinstance(declaration, bytes) else json.dumps(declaration).encode()
        return read_manifest(text, file="acquisition.json", **{"protocol": None, **options})

    return read_one


@pytest.fixture
def smallest():
    """Return the text of the smallest legal protocol."""
    return SMALLEST_PROTOCOL
