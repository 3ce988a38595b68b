"""What a site declares is taken as it is meant or refused with the field, the value and a remedy; nothing is guessed."""

import json
import pickle
from datetime import UTC, datetime, timedelta

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from flows.errors import InputError
from flows.study.manifest import Manifest, read_manifest
from flows.study.protocol import bare_protocol, parse_protocol


@pytest.fixture
def refusal(read):
    def refused(declaration, **options):
        with pytest.raises(InputError) as caught:
            read(declaration, **options)
        assert caught.value.file == "acquisition.json"
        return caught.value

    return refused


def changed(declared, path, value):
    """Set what stands at a path such as runs.0.kind; None takes it away."""
    *parents, last = [int(part) if part.isdigit() else part for part in path.split(".")]
    place = declared
    for part in parents:
        place = place[part]
    if value is None:
        del place[last]
    else:
        place[last] = value
    return declared


def test_everything_the_contract_shows_is_read(read, declared):
    manifest = read(declared)
    assert manifest.recorded_at == datetime(2026, 3, 4, 8, 12, tzinfo=UTC)
    assert manifest.recorded_at.utcoffset() == timedelta(0)
    assert manifest.recorded_at_text == "2026-03-04T09:12:00+01:00"
    (run,) = manifest.runs
    assert run.channels.pressure.column == "p_lv"
    assert run.channels.volume.calibrated is True
    assert run.events[0].kind == "occlusion-on"
    assert manifest.sensors.volume.blood_resistivity_ohm_cm == 150.0
    assert manifest.calibration.volume.reference.source == "CMR"
    assert [zero.mmhg for zero in manifest.calibration.pressure.readings()] == [0.2, 0.6, 1.1]
    assert list(run.channels.signals()) == ["pressure", "volume", "ecg"]
    assert manifest.calibration_of(run) is manifest.calibration


def test_the_least_a_site_must_send_is_enough(read, declared):
    for key in ("session", "rhythm", "subject_facts", "sensors", "calibration"):
        del declared[key]
    for key in ("stage", "started_at", "ended_at", "heart_rate_per_min", "respiration", "events"):
        del declared["runs"][0][key]
    manifest = read(declared)
    assert manifest.sensors.pressure.kind is None
    assert manifest.calibration.volume.alpha is None
    assert manifest.calibration.pressure.readings() == ()
    assert manifest.subject_facts.conditions == ()


def test_a_manifest_is_frozen_and_crosses_to_another_process_whole(read, declared):
    manifest = read(declared)
    with pytest.raises(ValueError, match="frozen"):
        manifest.subject = "other"
    twin = pickle.loads(pickle.dumps(manifest))  # noqa: S301  (made one line above)
    assert twin == manifest
    assert twin.recorded_at_text == manifest.recorded_at_text


@pytest.mark.parametrize(
    ("path", "value", "field", "words", "remedy"),
    [
        ("subjekt", "H-014", "subjekt", "not known here", "Did you mean 'subject'?"),
        ("runs.0.sampling_rate", 250, "runs[0].sampling_rate", "not known here", "Did you mean 'sampling_rate_hz'?"),
        ("runs.0.channels.presure", {}, "runs[0].channels.presure", "not known here", "Did you mean 'pressure'?"),
        ("calibration.volume.aplha", 1, "calibration.volume.aplha", "not known here", "Did you mean 'alpha'?"),
        ("calibration.volume.reference.edv", 1, "calibration.volume.reference.edv", "not known here", "Did you mean 'edv_ml'?"),
        ("own", 1, "own", "not known here", "begins with x_"),
        ("runs.0.channels.pressure.unit", "mmHg", "runs[0].channels.pressure.unit", "not one of", "Did you mean 'mm[Hg]'?"),
        ("runs.0.channels.volume.unit", "ml", "runs[0].channels.volume.unit", "not one of", "Did you mean 'mL'?"),
        ("runs.0.channels.time.unit", "min", "runs[0].channels.time.unit", "not one of", ""),
        ("runs.0.kind", "preload reduction", "runs[0].kind", "not one of", "Did you mean 'preload-reduction'?"),
        ("runs.0.manoeuvre", "valsalva", "runs[0].manoeuvre", "not one of", "Did you mean 'Valsalva'?"),
        ("runs.0.events.0.kind", "occlusion", "runs[0].events[0].kind", "not one of", "Did you mean 'occlusion-"),
        ("runs.0.respiration", "Held", "runs[0].respiration", "not one of", "'held'"),
        ("rhythm", "Sinus", "rhythm", "not one of", "Did you mean 'sinus'?"),
        ("chamber", "lv", "chamber", "not one of", "Did you mean 'LV'?"),
        ("chamber", "BV", "chamber", "not one of", ""),
        ("subject_facts.conditions.0", "mitral regurgitation", "subject_facts.conditions[0]", "not one of", "'mitral-regurgitation'"),
        ("sensors.pressure.kind", "manometer", "sensors.pressure.kind", "not one of", "'tip-manometer'"),
        ("calibration.volume.method", "hypertonic", "calibration.volume.method", "not one of", "Known here"),
        ("calibration.volume.reference.source", "MRI", "calibration.volume.reference.source", "not one of", "Did you mean 'CMR'?"),
        ("chamber", None, "chamber", "is missing", "Add it."),
        ("recorded_at", None, "recorded_at", "is missing", "Add it."),
        ("runs", [], "runs", "is empty", "Add at least one."),
        ("runs.0.sampling_rate_hz", "250", "runs[0].sampling_rate_hz", "must be a number", "without quotes"),
        ("runs.0.sampling_rate_hz", 0, "runs[0].sampling_rate_hz", "greater than 0", ""),
        ("runs.0.sampling_rate_hz", -250, "runs[0].sampling_rate_hz", "greater than 0", ""),
        ("runs.0.sampling_rate_hz", True, "runs[0].sampling_rate_hz", "must be a number", ""),
        ("runs.0.channels.volume.calibrated", "true", "runs[0].channels.volume.calibrated", "true or false", "without quotes"),
        ("runs.0.channels.volume.calibrated", 1, "runs[0].channels.volume.calibrated", "true or false", ""),
        ("subject", 14, "subject", "must be text", "in quotes"),
        ("runs", {}, "runs", "is empty", ""),
        ("runs", {"a": 1}, "runs", "must be a list", ""),
        ("runs.0", 3, "runs[0]", "table of keys and values", ""),
        ("subject_facts.bsa_m2", 0, "subject_facts.bsa_m2", "greater than 0", ""),
        ("calibration.volume.alpha", 0, "calibration.volume.alpha", "greater than 0", ""),
        ("calibration.volume.alpha_sd", -0.1, "calibration.volume.alpha_sd", "at least 0", ""),
        ("format", "1", "format", "not the number of a format", "Write 1"),
        ("format", True, "format", "not the number of a format", ""),
        ("format", 0, "format", "not the number of a format", ""),
        ("format", 2, "format", "newer than this program reads", "Update the program"),
        ("runs.0.stage", "", "runs[0].stage", "not a plain label", ""),
        ("runs.0.stage", "a\nb", "runs[0].stage", "not a plain label", ""),
    ],
)
def test_what_cannot_be_taken_is_named_with_a_remedy(refusal, declared, path, value, field, words, remedy):
    caught = refusal(changed(declared, path, value))
    assert caught.field == field
    assert words in caught.problem
    assert remedy in caught.remedy


@pytest.mark.parametrize("key", ["subject", "visit", "acquisition", "session", "study", "site"])
@pytest.mark.parametrize("name", ["", ".", "..", "a/b", "a b", "é", "a" * 65, "a\x00", "<b>"])
def test_pseudonyms_that_cannot_be_used_are_refused(refusal, declared, key, name):
    assert refusal(declared | {key: name}).field == key


@pytest.mark.parametrize("name", ["a" * 64, "...", "-", "_", "A.b-c_1"])
def test_every_pseudonym_of_the_contract_is_taken(read, declared, name):
    assert read(declared | {"acquisition": name}).acquisition == name


def test_keys_of_the_sites_own_are_passed_over_at_every_level(read, declared):
    plain = read(declared)
    for place in (declared, declared["runs"][0], declared["runs"][0]["channels"], declared["calibration"]["volume"], declared["sensors"]):
        place["x_note"] = {"anything": [1, None]}
    assert read(declared) == plain


@pytest.mark.parametrize(
    ("text", "utc"),
    [
        ("2026-03-04T09:12:00+01:00", datetime(2026, 3, 4, 8, 12, tzinfo=UTC)),
        ("2026-03-04T09:12:00Z", datetime(2026, 3, 4, 9, 12, tzinfo=UTC)),
        ("2026-03-04t09:12:00.250z", datetime(2026, 3, 4, 9, 12, 0, 250_000, tzinfo=UTC)),
        ("2026-03-04 09:12:00-00:30", datetime(2026, 3, 4, 9, 42, tzinfo=UTC)),
        ("2026-10-25T01:30:00+01:00", datetime(2026, 10, 25, 0, 30, tzinfo=UTC)),
    ],
)
def test_times_with_an_offset_become_utc(read, declared, text, utc):
    manifest = read(declared | {"recorded_at": text})
    assert manifest.recorded_at == utc
    assert manifest.recorded_at_text == text


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("2026-03-04T09:12:00", "without an offset"),
        ("2026-03-04T09:12", "not an RFC 3339 time"),
        ("2026-03-04", "not an RFC 3339 time"),
        ("04.03.2026 09:12", "not an RFC 3339 time"),
        ("2026-03-04T09:12:00 CET", "not an RFC 3339 time"),
        ("2026-02-30T09:12:00Z", "not a date and time that exists"),
        ("2026-03-04T25:12:00Z", "not a date and time that exists"),
        ("0001-01-01T00:00:00+14:00", "not a date and time that exists"),
        (1772611920, "is not a time"),
    ],
)
def test_other_times_are_refused_with_an_example(refusal, declared, text, words):
    caught = refusal(declared | {"recorded_at": text})
    assert words in caught.problem
    assert "2026-03-04T09:12:00+01:00" in caught.remedy


@pytest.mark.parametrize(
    "name", ["../rest-1.csv", "/rest-1.csv", "a\\b.csv", "a//b.csv", "./rest-1.csv", "a/../b.csv", "a\x00.csv", "", "C:x.csv"]
)
def test_files_outside_the_package_cannot_be_named(refusal, declared, name):
    assert refusal(changed(declared, "runs.0.file", name)).field == "runs[0].file"
    channels = {"column": "e", "unit": "mV", "file": name}
    declared["runs"][0]["file"] = "rest-1.csv"
    assert refusal(changed(declared, "runs.0.channels.ecg", channels)).field == "runs[0].channels.ecg.file"


def test_every_problem_is_listed_the_first_one_leading(refusal, declared):
    declared["chamber"] = "X"
    declared["runs"][0] |= {"kind": "steadi", "sampling_rate_hz": "250"}
    caught = refusal(declared)
    assert (caught.field, caught.value) == ("chamber", "X")
    assert "2 more problems in this file" in caught.remedy
    assert "runs[0].kind: is not one of steady" in caught.remedy
    assert "runs[0].sampling_rate_hz: must be a number (found '250')" in caught.remedy


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (b"", "is not JSON"),
        (b"{", "is not JSON"),
        (b'{"a": 1,}', "is not JSON"),
        (b"\xff\xfe{}", "is not UTF-8 at byte 1"),
        (b"[]", "must be one JSON object"),
        (b"null", "must be one JSON object"),
        (b'{"a": 1, "a": 1}', "stands twice"),
        (b'{"runs": [{"b": 1, "b": 2}]}', "stands twice"),
        (b'{"a": NaN}', "not finite"),
        (b'{"a": -Infinity}', "not finite"),
        (b'{"a": 1e999}', "beyond the range"),
        (b'{"a": ' + b"9" * 400 + b"}", "beyond the range"),
        (b'{"a": ' * 3000, "nested too deeply"),
        (b'{"a": "\\ud800"}', "surrogate"),
        (b'{"\\udc00": 1}', "surrogate"),
        (b" " * (8 * 1024 * 1024 + 1), "larger than 8 MB"),
    ],
)
def test_text_that_is_no_clean_json_object_is_refused(refusal, text, words):
    caught = refusal(text)
    assert words in caught.problem
    assert caught.remedy


def test_a_byte_order_mark_is_no_trouble(read, declared):
    assert read(b"\xef\xbb\xbf" + json.dumps(declared).encode()).subject == "H-014"


def test_a_run_ends_after_it_starts(refusal, declared):
    caught = refusal(changed(declared, "runs.0.ended_at", declared["runs"][0]["started_at"]))
    assert "ended_at is not after started_at" in caught.problem


def test_runs_are_told_apart_by_name_and_by_file(refusal, read, declared):
    second = declared["runs"][0] | {"run": "rest-2", "file": "rest-2.csv"}
    assert len(read(declared | {"runs": [*declared["runs"], second]}).runs) == 2
    assert "two runs are called 'rest-1'" in refusal(declared | {"runs": [*declared["runs"], second | {"run": "rest-1"}]}).problem
    assert "name the same columns" in refusal(declared | {"runs": [*declared["runs"], second | {"file": "rest-1.csv"}]}).problem


@pytest.mark.parametrize(
    ("kind", "left_out", "words"),
    [
        ("steady", "pressure", "a steady run needs a pressure channel"),
        ("preload-reduction", "pressure", "a preload-reduction run needs a pressure channel"),
        ("steady", "volume", "a steady run needs a volume channel"),
        ("saline", "volume", "a saline run needs a volume channel"),
    ],
)
def test_a_run_has_the_channels_its_kind_needs(refusal, declared, kind, left_out, words):
    declared["runs"][0]["kind"] = kind
    del declared["runs"][0]["channels"][left_out]
    assert words in refusal(declared).problem


def test_a_saline_run_needs_no_pressure(read, declared):
    declared["runs"][0]["kind"] = "saline"
    del declared["runs"][0]["channels"]["pressure"]
    assert read(declared).runs[0].channels.pressure is None


def with_segments(declared, used, **changes):
    channels = declared["runs"][0]["channels"]
    del channels["volume"]
    channels["segments"] = [{"column": name, "unit": "mS"} | changes.get(name, {}) for name in ("g1", "g2", "g3")]
    declared["calibration"]["volume"]["segments_used"] = used
    return declared


@pytest.mark.parametrize("used", [[2, 3], ["g2", "g3"], [2, "g3"]])
def test_segments_are_used_by_number_or_by_column(read, declared, used):
    manifest = read(with_segments(declared, used))
    assert manifest.segments_used(manifest.runs[0]) == (2, 3)
    assert list(manifest.runs[0].channels.signals()) == ["pressure", "ecg", "segment-1", "segment-2", "segment-3"]


@pytest.mark.parametrize(("used", "words"), [([4], "no such segment"), ([0], "no such segment"), (["g4"], "no such segment")])
def test_segments_that_are_not_there_are_refused(refusal, declared, used, words):
    assert words in refusal(with_segments(declared, used)).problem


@pytest.mark.parametrize("used", [[1, 1], [1.5], [True], [None]])
def test_segments_named_in_no_way_are_refused(refusal, declared, used):
    assert "segments_used" in refusal(with_segments(declared, used)).problem


def test_segments_that_cannot_be_summed_are_refused(refusal, declared):
    assert "differ in unit" in refusal(with_segments(declared, [1], g2={"unit": "mL"})).problem


def test_two_channels_never_share_a_column(refusal, declared):
    caught = refusal(changed(declared, "runs.0.channels.volume.column", "p_lv"))
    assert "channels pressure and volume name the same column 'p_lv'" in caught.problem


def test_one_column_name_in_two_files_is_no_trouble(read, declared):
    declared["runs"][0]["channels"]["ecg"] = {"column": "p_lv", "unit": "mV", "file": "ecg.csv"}
    assert read(declared).runs[0].signal_files() == ("rest-1.csv", "ecg.csv")


def test_calibration_points_must_give_a_line(refusal, declared):
    declared["calibration"]["pressure"]["points"] = [{"applied_mmhg": 0, "read_mmhg": 1}, {"applied_mmhg": 0, "read_mmhg": 2}]
    assert "give no line" in refusal(declared).problem


def test_a_reference_heart_empties(refusal, declared):
    declared["calibration"]["volume"]["reference"] |= {"edv_ml": 65, "esv_ml": 140}
    assert "swapped" in refusal(declared).remedy


def test_a_runs_calibration_replaces_the_acquisitions(read, declared):
    declared["runs"][0]["calibration"] = {"volume": {"alpha": 1.1}}
    manifest = read(declared)
    held = manifest.calibration_of(manifest.runs[0])
    assert held.volume.alpha == 1.1
    assert held.pressure.readings() == ()


def test_with_a_gain_on_record_the_site_must_say_whether_it_was_applied(refusal, read, declared):
    del declared["runs"][0]["channels"]["volume"]["calibrated"]
    caught = refusal(declared)
    assert caught.field == "runs[0].channels.volume.calibrated"
    assert "true" in caught.remedy
    assert "false" in caught.remedy
    del declared["calibration"]["volume"]
    assert read(declared).runs[0].channels.volume.calibrated is True


def test_raw_volume_without_a_gain_is_for_the_checks_not_refused_here(read, declared):
    declared["runs"][0]["channels"]["volume"]["calibrated"] = False
    del declared["calibration"]["volume"]
    assert read(declared).runs[0].channels.volume.is_raw


def test_a_conductance_is_raw_whatever_is_declared(read, declared):
    declared["runs"][0]["channels"]["volume"] |= {"unit": "mS", "calibrated": True}
    assert read(declared).runs[0].channels.volume.is_raw


PROTOCOL = """
[study]
name = "tarn"
version = "1"
chambers = ["LV"]
[sites.harbour]
timezone = "Europe/Lisbon"
[sites.moor]
timezone = "Europe/Dublin"
[[visits]]
name = "baseline"
[[stages]]
name = "baseline"
[[stages]]
name = "dose 1"
[subjects]
expected = {harbour = ["H-014", "H-015"]}
"""


@pytest.mark.parametrize(
    ("path", "value", "field", "remedy"),
    [
        ("study", "tern", "study", "Did you mean 'tarn'?"),
        ("site", "harbor", "site", "Did you mean 'harbour'?"),
        ("visit", "base-line", "visit", "Did you mean 'baseline'?"),
        ("chamber", "RV", "chamber", "Known here: LV."),
        ("subject", "H-041", "subject", "Did you mean 'H-01"),
        ("runs.0.stage", "dose-1", "runs[0].stage", "Did you mean 'dose 1'?"),
    ],
)
def test_what_the_protocol_does_not_know_is_refused(refusal, read, declared, path, value, field, remedy):
    protocol = parse_protocol(PROTOCOL.encode(), file="protocol.toml")
    assert read(declared, protocol=protocol).subject == "H-014"
    caught = refusal(changed(declared, path, value), protocol=protocol)
    assert (caught.field, caught.value) == (field, value)
    assert "not in the study protocol" in caught.problem
    assert remedy in caught.remedy


def test_a_site_without_a_list_may_send_any_subject(read, declared):
    protocol = parse_protocol(PROTOCOL.encode(), file="protocol.toml")
    assert read(declared | {"site": "moor", "subject": "M-9"}, protocol=protocol).subject == "M-9"


def test_without_visits_and_stages_any_label_is_taken(read, declared):
    declared["runs"][0]["stage"] = "whatever"
    assert read(declared | {"visit": "any"}, protocol=bare_protocol("tarn", "harbour")).visit == "any"


def test_the_site_must_be_that_of_the_folder(refusal, read, declared):
    assert read(declared, site="harbour").site == "harbour"
    caught = refusal(declared, site="moor")
    assert (caught.field, caught.value) == ("site", "harbour")


def test_named_files_must_be_in_the_package(refusal, read, declared):
    declared["runs"][0]["channels"]["ecg"]["file"] = "ecg.csv"
    assert read(declared, files=["acquisition.json", "rest-1.csv", "ecg.csv"]).subject == "H-014"
    caught = refusal(declared, files=["acquisition.json", "rest-1.csv", "ecg1.csv"])
    assert (caught.field, caught.value) == ("runs[0].channels.ecg.file", "ecg.csv")
    assert "Did you mean 'ecg1.csv'?" in caught.remedy
    declared["runs"][0]["file"] = "acquisition.json"
    assert refusal(declared, files=["acquisition.json", "ecg.csv"]).field == "runs[0].file"


def test_runs_without_channels_take_those_of_the_sites_profile(refusal, read, declared, smallest):
    profile = """
[sites.harbour.profile]
time = {column = "time_ms", unit = "ms"}
pressure = {column = "plv", unit = "kPa"}
volume = {column = "vlv", unit = "mL", calibrated = true}
"""
    del declared["runs"][0]["channels"]
    manifest = read(declared, protocol=parse_protocol((smallest + profile).encode(), file="protocol.toml"))
    assert manifest.runs[0].channels.pressure.unit == "kPa"
    assert manifest.runs[0].channels.time.column == "time_ms"
    assert refusal(declared, protocol=parse_protocol(smallest.encode(), file="protocol.toml")).field == "runs[0].channels"


JSON = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats(allow_nan=False, allow_infinity=False) | st.text(max_size=8),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=8), inner, max_size=3),
    max_leaves=6,
)


def places(value, path=()):
    """Return the path of every key and entry in nested tables and lists."""
    inner = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    return [place for key, entry in inner for place in ((*path, key), *places(entry, (*path, key)))]


@settings(deadline=None, max_examples=150)
@given(data=st.data())
def test_anything_put_anywhere_is_read_or_refused_in_words(data):
    from_text = json.loads(FULL_TEXT)
    path = data.draw(st.sampled_from(places(from_text)))
    place = from_text
    for part in path[:-1]:
        place = place[part]
    place[path[-1]] = data.draw(JSON)
    try:
        found = read_manifest(json.dumps(from_text).encode(), file="acquisition.json", protocol=None)
    except InputError as refused:
        assert refused.field or refused.remedy  # noqa: PT017  (either outcome is right, and both are looked at)
        return
    assert isinstance(found, Manifest)


FULL_TEXT = json.dumps(
    {
        "format": 1,
        "study": "tarn",
        "site": "harbour",
        "subject": "H-014",
        "visit": "baseline",
        "acquisition": "H-014-baseline",
        "recorded_at": "2026-03-04T09:12:00+01:00",
        "chamber": "LV",
        "calibration": {
            "pressure": {"zeros": [{"mmhg": 0.6}], "points": [{"applied_mmhg": 0, "read_mmhg": 0.1}, {"applied_mmhg": 9, "read_mmhg": 9}]},
            "volume": {"alpha": 0.8, "segments_used": [1], "reference": {"source": "CMR"}},
        },
        "runs": [
            {
                "run": "rest-1",
                "kind": "steady",
                "file": "rest-1.csv",
                "sampling_rate_hz": 250,
                "events": [{"at_s": 8.0, "kind": "note"}],
                "channels": {
                    "time": {"column": "t", "unit": "s"},
                    "pressure": {"column": "p", "unit": "mm[Hg]"},
                    "segments": [{"column": "g", "unit": "mS"}],
                },
            },
        ],
    },
)
