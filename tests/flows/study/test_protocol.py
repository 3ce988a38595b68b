"""The protocol is read as it stands; a misspelling anywhere is answered, never passed over."""

import hashlib
import pickle

import pytest

from checks import ALL as CHECKS
from flows.errors import InputError
from flows.study.protocol import bare_protocol, lock_breaches, parse_protocol, read_protocol


def parsed(text):
    return parse_protocol(text.encode(), file="protocol.toml")


def refusal(text):
    with pytest.raises(InputError) as caught:
        parse_protocol(text if isinstance(text, bytes) else text.encode(), file="protocol.toml")
    assert caught.value.file == "protocol.toml"
    return caught.value


def test_the_smallest_protocol_has_a_default_for_everything_else(smallest):
    protocol = parsed(smallest)
    assert (protocol.study.name, protocol.study.version, protocol.study.timezone) == ("tarn", "1", "UTC")
    assert protocol.study.chambers == ("LV", "RV")
    assert protocol.sites["harbour"].timezone == "Europe/Lisbon"
    assert (protocol.visits, protocol.stages, protocol.limits) == ((), (), {})
    assert protocol.policy.suspect == "accept"
    assert protocol.policy.required_checks == ("landmarks", "missing-samples")
    assert protocol.policy.repeat_visit == "query"
    assert not protocol.policy.correct_estimated_delay
    assert not protocol.policy.alpha_from_reference
    assert protocol.review.second_reading_share == 0.0
    assert protocol.subjects.expected == {}
    assert protocol.reference_stage is None
    assert protocol.sha256 == hashlib.sha256(smallest.encode()).hexdigest()


FULL = """
[study]
name = "tarn"
version = "2"
timezone = "Europe/Dublin"
chambers = ["LV"]
lock = {loop-closure = 1}

[sites.harbour]
timezone = "Europe/Lisbon"
[sites.harbour.profile]
pressure = {column = "plv", unit = "kPa"}
volume = {column = "vlv", unit = "mL"}

[[visits]]
name = "baseline"
required_runs = ["steady", "preload-reduction", "preload-reduction"]
required_stages = ["rest"]

[[stages]]
name = "rest"
[[stages]]
name = "dose 1"
reference = true

[limits.loop-closure]
fail_above = 0.12

[policy]
suspect = "reject"
required_checks = ["landmarks", "loop-closure"]
correct_estimated_delay = true
alpha_from_reference = true
repeat_visit = "accept"

[review]
second_reading_share = 0.1

[subjects]
expected = {harbour = ["H-001"]}
"""


def test_everything_a_protocol_may_say_is_kept():
    protocol = parsed(FULL)
    assert protocol.limits == {"loop-closure": {"fail_above": 0.12}}
    assert protocol.visits[0].required_runs == ("steady", "preload-reduction", "preload-reduction")
    assert [stage.name for stage in protocol.stages] == ["rest", "dose 1"]
    assert protocol.reference_stage == "dose 1"
    assert protocol.study.lock == {"loop-closure": 1}
    assert protocol.subjects.expected == {"harbour": ("H-001",)}
    assert protocol.sites["harbour"].profile.pressure.column == "plv"
    assert protocol.policy.required_checks == ("landmarks", "loop-closure")


def test_without_a_mark_the_first_stage_is_the_reference(smallest):
    assert parsed(smallest + '[[stages]]\nname = "rest"\n[[stages]]\nname = "dose"\n').reference_stage == "rest"


def test_the_hash_is_of_the_bytes(smallest):
    assert parsed(smallest).sha256 != parsed(smallest + "\n").sha256


def test_a_protocol_is_frozen_and_crosses_to_another_process_whole():
    protocol = parsed(FULL)
    with pytest.raises(ValueError, match="frozen"):
        protocol.limits = {}
    twin = pickle.loads(pickle.dumps(protocol))  # noqa: S301  (made one line above)
    assert twin == protocol
    assert twin.sha256 == protocol.sha256


@pytest.mark.parametrize(
    ("more", "field", "words", "remedy"),
    [
        ("[polcy]\n", "polcy", "not known here", "Did you mean 'policy'?"),
        ("[limit.x]\n", "limit", "not known here", "Did you mean 'limits'?"),
        ('[[visit]]\nname="a"\n', "visit", "not known here", "Did you mean 'visits'?"),
        ('[policy]\nsuspects = "accept"\n', "policy.suspects", "not known here", "Did you mean 'suspect'?"),
        ('[policy]\nsuspect = "accepted"\n', "policy.suspect", "not one of accept, reject", "Did you mean 'accept'?"),
        ('[policy]\nrepeat_visit = "ignore"\n', "policy.repeat_visit", "not one of", ""),
        ('[policy]\ncorrect_estimated_delay = "yes"\n', "policy.correct_estimated_delay", "true or false", ""),
        ('[policy]\nrequired_checks = ["landmark"]\n', "policy.required_checks", "is not a check of beats", "Did you mean 'landmarks'?"),
        ('[policy]\nrequired_checks = ["time-base"]\n', "policy.required_checks", "is not a check of beats", ""),
        ("[study.lock]\nloop-closur = 1\n", "study.lock", "neither a check nor an index", "Did you mean 'loop-closure'?"),
        ("[study.lock]\nEes = 1.5\n", "study.lock.Ees", "whole number", ""),
        ("[limits.loop-closur]\nfail_above = 1\n", "limits", "is not a check", "Did you mean 'loop-closure'?"),
        (
            "[limits.loop-closure]\nfail_abov = 1\n",
            "limits.loop-closure.fail_abov",
            "not a limit of this check",
            "Did you mean 'fail_above'?",
        ),
        ('[limits.loop-closure]\nfail_above = "1"\n', "limits.loop-closure.fail_above", "must be a number", "without quotes"),
        ("[limits.loop-closure]\nfail_above = nan\n", "limits.loop-closure.fail_above", "finite", ""),
        ("[limits.loop-closure]\nfail_above = inf\n", "limits.loop-closure.fail_above", "finite", ""),
        ("[limits.loop-closure]\nfail_above = true\n", "limits.loop-closure.fail_above", "must be a number", ""),
        ("[limits.loop-closure]\nsuspect_above = 0.3\nfail_above = 0.2\n", "limits.loop-closure", "fails before it suspects", "Swap"),
        ("[limits]\nloop-closure = 0.2\n", "limits.loop-closure", "table", ""),
        ('[[visits]]\nname="a"\nrequired_runs=["rest"]\n', "visits[0].required_runs[0]", "not one of steady", ""),
        ('[[visits]]\nname="a"\n[[visits]]\nname="a"\n', None, "[[visits]] lists 'a' twice", "Keep one"),
        ('[[stages]]\nname="a"\n[[stages]]\nname="a"\n', None, "[[stages]] lists 'a' twice", "Keep one"),
        ('[[stages]]\nname="a"\nreference=true\n[[stages]]\nname="b"\nreference=true\n', None, "two stages are marked", "Mark one"),
        ('[[visits]]\nname="v"\nrequired_stages=["rst"]\n[[stages]]\nname="rest"\n', None, "requires stage 'rst'", "Did you mean 'rest'?"),
        ("[review]\nsecond_reading_share = 1.5\n", "review.second_reading_share", "at most 1", ""),
        ('[subjects]\nexpected = {harbor = ["H-1"]}\n', None, "unknown site 'harbor'", "Did you mean 'harbour'?"),
        ('[subjects]\nexpected = {harbour = ["H/1"]}\n', "subjects.expected.harbour[0]", "not a name", ""),
        ('[subjects]\nexpected = ["H-1"]\n', "subjects.expected", "table", ""),
        ('[sites.moor]\ntimezone = "Europe/Dubln"\n', "sites.moor.timezone", "IANA", "Did you mean 'Europe/Dublin'?"),
        ('[sites.moor]\ntimezone = "CEST"\n', "sites.moor.timezone", "IANA", ""),
        ('[sites.moor]\ntimezone = "../../etc/localtime"\n', "sites.moor.timezone", "IANA", ""),
        ('[sites.moor]\ntimezone = "Europe"\n', "sites.moor.timezone", "IANA", ""),
        ('[sites.moor]\ntimezone = ""\n', "sites.moor.timezone", "IANA", ""),
        ("[sites.moor]\n", "sites.moor.timezone", "is missing", ""),
        ('[sites."a/b"]\ntimezone = "UTC"\n', None, "site 'a/b' is not a name", ""),
        ('[sites.moor]\ntimezone = "UTC"\nx_own = 1\n', "sites.moor.x_own", "not known here", ""),
        ('[sites.harbour.profile]\npresure = {column = "p", unit = "kPa"}\n', "sites.harbour.profile.presure", "not known", "'pressure'"),
        ("[study]\n", None, "is not TOML", ""),
    ],
)
def test_whatever_is_misspelt_or_impossible_is_answered(smallest, more, field, words, remedy):
    caught = refusal(smallest + more)
    assert caught.field == field
    assert words in caught.problem
    assert remedy in caught.remedy


def test_the_study_itself_is_held_to_its_names(smallest):
    assert refusal(smallest.replace('"1"', "1")).remedy == "Put it in quotes."
    assert refusal(smallest.replace("version", "versoin")).field in {"study.version", "study.versoin"}
    assert refusal("[study]\nname='tarn'\nversion='1'\n").field == "sites"
    assert refusal("[study]\nname='tarn'\nversion='1'\nchambers=[]\n[sites.a]\ntimezone='UTC'\n").field == "study.chambers"
    assert "is missing" in refusal("").problem


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"\xff", "is not UTF-8"),
        (b"[study", "is not TOML"),
        (b"a = 1\na = 2\n", "is not TOML"),
        (b"a = " + b"[" * 5000, "is not TOML"),
        (b"a = " + b"9" * 5000, "is not TOML"),
        (b"#" * (4 * 1024 * 1024 + 1), "larger than 4 MB"),
    ],
)
def test_text_that_is_no_toml_is_refused(content, words):
    assert words in refusal(content).problem


def test_line_ends_and_a_byte_order_mark_are_no_trouble(smallest):
    assert parse_protocol(b"\xef\xbb\xbf" + smallest.replace("\n", "\r\n").encode(), file="protocol.toml").study.name == "tarn"


def test_every_check_with_limits_takes_its_own_and_refuses_a_foreign_one(smallest):
    bounds = {"suspect_above", "fail_above", "suspect_below", "fail_below"}
    for check in CHECKS:
        declared = {*check.limits.declared(), *(check.limits_rv.declared() if check.limits_rv else ())}
        for bound in declared:
            assert parsed(f"{smallest}[limits.{check.name}]\n{bound} = 1\n").limits == {check.name: {bound: 1.0}}
        for bound in bounds - declared:
            assert "not a limit of this check" in refusal(f"{smallest}[limits.{check.name}]\n{bound} = 1\n").problem


def test_the_file_is_read_from_the_study_folder(tmp_path, smallest):
    (tmp_path / "protocol.toml").write_text(smallest)
    assert read_protocol(tmp_path).study.name == "tarn"


def test_a_study_without_a_protocol_is_told_the_smallest_one(tmp_path):
    with pytest.raises(InputError, match="does not exist") as caught:
        read_protocol(tmp_path)
    assert "[study] name" in caught.value.remedy
    with pytest.raises(InputError, match="nor does its folder"):
        read_protocol(tmp_path / "absent")
    (tmp_path / "protocol.toml").mkdir()
    with pytest.raises(InputError, match="cannot be read"):
        read_protocol(tmp_path)


def test_a_bare_protocol_takes_the_site_it_is_made_for():
    protocol = bare_protocol("tarn", "harbour")
    assert list(protocol.sites) == ["harbour"]
    assert protocol.limits == {}
    assert protocol.sha256 == bare_protocol("tarn", "harbour").sha256


def test_a_lock_names_what_moved():
    protocol = parsed(FULL)
    assert lock_breaches(protocol, {"loop-closure": 1, "landmarks": 9}) == []
    assert lock_breaches(protocol, {"loop-closure": 2}) == ["loop-closure is locked at revision 1 and stands at 2"]
    assert lock_breaches(protocol, {}) == ["loop-closure is locked at revision 1 and stands at none"]
