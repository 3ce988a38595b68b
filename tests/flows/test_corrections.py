"""What the policy lets evidence put right, and that it does so only when the protocol says so."""

import json

import numpy as np
import pytest

from flows.assess import assess
from flows.sources.simulated.acquisition import VOLUME
from flows.sources.simulated.corpus import Shelf, clean_acquisition
from flows.sources.simulated.faults import with_columns, with_facts
from flows.study.manifest import read_manifest
from flows.study.protocol import parse_protocol

STUDY = '[study]\nname = "tarn"\nversion = "1"\n[sites.harbour]\ntimezone = "Europe/Lisbon"\n'
VOLUMES = ("EDV", "ESV", "SV", "SW", "Ea", "Ees")


@pytest.fixture(scope="module")
def sound():
    return clean_acquisition("normal", 250.0, 1)[0]


def assessed(folder, acquisition, policy=""):
    protocol = parse_protocol((STUDY + (f"[policy]\n{policy} = true\n" if policy else "")).encode(), file="protocol.toml")
    manifest = read_manifest(json.dumps(acquisition.manifest).encode(), file="acquisition.json", protocol=protocol)
    return assess(Shelf(folder).files(acquisition), manifest, protocol)


def values(found):
    return {row["index"]: row["value"] for row in found.indices if row["primary"] and row["status"] == "published"}


def corrections(found):
    return [(row["run"], row["check"]) for row in found.rejections if row["action"] == "correct"]


def declaring_alpha(acquisition, alpha):
    def change(manifest):
        volume = manifest["calibration"]["volume"]
        if alpha is None:
            del volume["alpha"], volume["alpha_sd"]
        else:
            volume["alpha"] = alpha

    return with_facts(acquisition, change)


def late(acquisition, seconds, run):
    shift = round(250.0 * seconds)
    return with_columns(acquisition, run, {VOLUME: np.roll(acquisition.columns[run][VOLUME], shift)})


@pytest.mark.parametrize(("alpha", "check"), [(None, "volume-gain-known"), (0.5, "reference-stroke-volume")])
def test_alpha_is_set_from_the_reference_where_the_policy_says_so(tmp_path, sound, alpha, check):
    broken = declaring_alpha(sound, alpha)
    withheld, right = values(assessed(tmp_path, broken)), values(assessed(tmp_path, sound))
    assert not set(VOLUMES) & set(withheld)
    found = assessed(tmp_path, broken, "alpha_from_reference")
    corrected = values(found)
    assert corrected["SV"] == pytest.approx(sound.manifest["calibration"]["volume"]["reference"]["sv_ml"], rel=1e-3)
    assert all(corrected[name] == pytest.approx(right[name], rel=0.06) for name in VOLUMES)
    row = next(row for row in found.rejections if row["action"] == "correct")
    assert (row["run"], row["check"], row["decisive"]) == (None, check, False)
    assert row["value"] == pytest.approx(sound.manifest["calibration"]["volume"]["alpha"], rel=0.06)
    assert f"{row['value']:.3g}" in row["reason"]
    assert check not in (found.acquisition["reasons"] or "")


def test_an_alpha_the_reference_confirms_is_left_alone(tmp_path, sound):
    found = assessed(tmp_path, sound, "alpha_from_reference")
    assert corrections(found) == []
    assert values(found) == values(assessed(tmp_path, sound))


def test_without_a_reference_an_alpha_stays_missing(tmp_path, sound):
    bare = with_facts(declaring_alpha(sound, None), lambda manifest: manifest["calibration"]["volume"].pop("reference"))
    found = assessed(tmp_path, bare, "alpha_from_reference")
    assert corrections(found) == []
    assert not set(VOLUMES) & set(values(found))


def test_a_reference_of_forward_flow_sets_no_gain_of_a_leaking_ventricle(tmp_path, sound):
    def change(manifest):
        manifest["subject_facts"]["conditions"] = ["mitral-regurgitation"]
        manifest["calibration"]["volume"]["reference"] = {"source": "thermodilution", "sv_ml": 50.0}

    found = assessed(tmp_path, with_facts(declaring_alpha(sound, None), change), "alpha_from_reference")
    assert corrections(found) == []


def test_an_estimated_delay_is_taken_out_where_the_policy_says_so(tmp_path, sound):
    broken = late(sound, 0.028, "rest")
    assert corrections(assessed(tmp_path, broken)) == []
    found = assessed(tmp_path, broken, "correct_estimated_delay")
    assert corrections(found) == [("rest", "channel-delay")]
    row = next(row for row in found.rejections if row["action"] == "correct")
    assert row["value"] == pytest.approx(28.0, abs=6.0)
    assert "late" in row["reason"]
    corrected, right = values(found), values(assessed(tmp_path, sound))
    assert set(corrected) == set(right)
    assert all(corrected[name] == pytest.approx(right[name], rel=0.04) for name in ("EDV", "ESV", "SV", "SW", "ESP", "Ea"))


def test_a_volume_that_is_early_is_moved_the_other_way(tmp_path, sound):
    found = assessed(tmp_path, late(sound, -0.028, "rest"), "correct_estimated_delay")
    row = next(row for row in found.rejections if row["action"] == "correct")
    assert row["value"] == pytest.approx(-28.0, abs=6.0)
    assert "early" in row["reason"]


def test_both_corrections_stand_together(tmp_path, sound):
    broken = declaring_alpha(late(sound, 0.028, "rest"), None)
    protocol = "alpha_from_reference = true\ncorrect_estimated_delay"
    assert set(corrections(assessed(tmp_path, broken, protocol))) == {(None, "volume-gain-known"), ("rest", "channel-delay")}


def test_a_delay_of_a_right_ventricle_is_never_corrected(tmp_path):
    right = clean_acquisition("right", 250.0, 9)[0]
    assert corrections(assessed(tmp_path, late(right, 0.06, "rest"), "correct_estimated_delay")) == []
